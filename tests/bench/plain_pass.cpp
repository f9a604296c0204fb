/// The floor for the benchmark: one pass over a two-channel 16-bit WAV file, read(2) in pieces of 1 MiB, and
/// a vectorised sum of squares of each channel. Whatever measures the file cannot do less.
///
///     plain_pass FILE.wav          prints: seconds, nanoseconds a sample, r.m.s. of both channels as a share
///     of full scale

#include <fcntl.h>
#include <unistd.h>

#include <array>
#include <chrono>
#include <cmath>
#include <cstddef>
#include <cstdint>
#include <cstdio>
#include <vector>

namespace {

constexpr std::size_t kPiece = std::size_t{1} << 20;
constexpr std::size_t kHeader = 44;  // of the WAV files that run.py writes
constexpr std::size_t kLanes = 16;   // even ones: channel 1, odd ones: channel 2

struct Squares {
  std::array<double, 2> sum{};
  std::size_t samples = 0;

  void add(const std::int16_t* samples_in, std::size_t count) {
    std::array<float, kLanes> lanes{};
    std::size_t i = 0;
    for (; i + kLanes <= count; i += kLanes) {
      for (std::size_t k = 0; k < kLanes; ++k) {
        const auto value = static_cast<float>(samples_in[i + k]);
        lanes[k] += value * value;
      }
    }
    for (std::size_t k = 0; k < kLanes; ++k)
      sum[k % 2] += static_cast<double>(lanes[k]);
    for (; i < count; ++i)
      sum[i % 2] += static_cast<double>(samples_in[i]) * static_cast<double>(samples_in[i]);
    samples += count;
  }
};

/// Fills `into` as far as the file goes; bytes read, or -1.
ssize_t read_fully(int file, char* into, std::size_t size) {
  std::size_t have = 0;
  while (have < size) {
    const ssize_t got = read(file, into + have, size - have);
    if (got < 0) return -1;
    if (got == 0) break;
    have += static_cast<std::size_t>(got);
  }
  return static_cast<ssize_t>(have);
}

}  // namespace

int main(int argc, char** argv) {
  if (argc != 2) {
    std::fprintf(stderr, "usage: plain_pass FILE.wav\n");
    return 2;
  }
  const auto begin = std::chrono::steady_clock::now();
  const int file = open(argv[1], O_RDONLY | O_CLOEXEC);
  if (file < 0 || lseek(file, kHeader, SEEK_SET) < 0) {
    std::perror(argv[1]);
    return 2;
  }
  std::vector<std::int16_t> piece(kPiece / sizeof(std::int16_t));
  Squares squares;
  ssize_t got = 0;
  while ((got = read_fully(file, reinterpret_cast<char*>(piece.data()), kPiece)) > 0) {
    const std::size_t frames = static_cast<std::size_t>(got) / (2 * sizeof(std::int16_t));
    squares.add(piece.data(), 2 * frames);
  }
  close(file);
  if (got < 0 || squares.samples == 0) {
    std::fprintf(stderr, "%s: cannot be read, or holds no samples\n", argv[1]);
    return 2;
  }
  const std::chrono::duration<double> taken = std::chrono::steady_clock::now() - begin;
  const double frames = static_cast<double>(squares.samples) / 2.0;
  std::printf("%.6f s, %.3f ns a sample, r.m.s. %.6f %.6f of full scale\n", taken.count(),
              taken.count() * 1e9 / static_cast<double>(squares.samples),
              std::sqrt(squares.sum[0] / frames) / 32768.0, std::sqrt(squares.sum[1] / frames) / 32768.0);
  return 0;
}
