#include "daemon/acquire/sound.hpp"

#include <alsa/asoundlib.h>
#include <dlfcn.h>
#include <gtest/gtest.h>
#include <time.h>

#include <atomic>
#include <bit>
#include <cmath>
#include <cstdlib>
#include <deque>
#include <functional>
#include <numbers>
#include <optional>
#include <string>
#include <vector>

#include "tests/acquire/whole_stream.hpp"

namespace {

/// A sound card as this test wants it, in place of the calls below; everything else is ALSA's own.
struct Card {
  std::vector<snd_pcm_format_t> formats;  // none: any
  unsigned channels_min = 0;              // 0: any number
  unsigned channels_max = 0;
  unsigned rate_hz = 0;            // 0: any
  unsigned longest_buffer_us = 0;  // 0: any
  bool interleaved = true;
  int open_error = 0;
  std::deque<int> wait_errors;  // of the waits that come next; 0: none
  std::deque<int> read_errors;
  int prepare_error = 0;
  // Times by the monotonic clock, 0: ALSA's own.
  std::int64_t started_ns = 0;
  std::int64_t restarted_ns = 0;  // in place of that, once prepared anew
  std::int64_t place_ns = 0;      // of the place in the buffer
  std::optional<snd_pcm_uframes_t> waiting;
  // What it was asked for.
  snd_pcm_t* pcm = nullptr;
  unsigned period_us = 0;
  unsigned buffer_us = 0;
  int prepared = 0;
};
Card card;

int next_of(std::deque<int>& errors) {
  if (errors.empty()) return 0;
  const int error = errors.front();
  errors.pop_front();
  return error;
}

template <class Function>
Function* real(const char* name) {
  return reinterpret_cast<Function*>(dlsym(RTLD_NEXT, name));
}

snd_htimestamp_t as_time(std::int64_t ns) {
  return {static_cast<time_t>(ns / 1'000'000'000), static_cast<long>(ns % 1'000'000'000)};
}

}  // namespace

extern "C" {

int snd_pcm_open(snd_pcm_t** pcm, const char* name, snd_pcm_stream_t stream, int mode) {
  if (card.open_error != 0) return card.open_error;
  const int result = real<decltype(snd_pcm_open)>("snd_pcm_open")(pcm, name, stream, mode);
  card.pcm = result == 0 ? *pcm : nullptr;
  return result;
}

int snd_pcm_hw_params_any(snd_pcm_t* pcm, snd_pcm_hw_params_t* params) {
  int result = real<decltype(snd_pcm_hw_params_any)>("snd_pcm_hw_params_any")(pcm, params);
  if (!card.formats.empty()) {
    snd_pcm_format_mask_t* mask = nullptr;
    snd_pcm_format_mask_malloc(&mask);
    snd_pcm_format_mask_none(mask);
    for (const auto format : card.formats)
      snd_pcm_format_mask_set(mask, format);
    EXPECT_EQ(snd_pcm_hw_params_set_format_mask(pcm, params, mask), 0);
    snd_pcm_format_mask_free(mask);
  }
  if (card.channels_max > 0) {
    unsigned min = card.channels_min;
    unsigned max = card.channels_max;
    EXPECT_EQ(snd_pcm_hw_params_set_channels_minmax(pcm, params, &min, &max), 0);
  }
  if (card.rate_hz > 0) {
    EXPECT_EQ(snd_pcm_hw_params_set_rate(pcm, params, card.rate_hz, 0), 0);
  }
  if (card.longest_buffer_us > 0) {
    EXPECT_EQ(snd_pcm_hw_params_set_buffer_time_max(pcm, params, &card.longest_buffer_us, nullptr), 0);
  }
  if (!card.interleaved) {
    EXPECT_EQ(snd_pcm_hw_params_set_access(pcm, params, SND_PCM_ACCESS_RW_NONINTERLEAVED), 0);
  }
  return result;
}

int snd_pcm_hw_params(snd_pcm_t* pcm, snd_pcm_hw_params_t* params) {
  const int result = real<decltype(snd_pcm_hw_params)>("snd_pcm_hw_params")(pcm, params);
  snd_pcm_hw_params_get_period_time(params, &card.period_us, nullptr);
  snd_pcm_hw_params_get_buffer_time(params, &card.buffer_us, nullptr);
  return result;
}

int snd_pcm_wait(snd_pcm_t* pcm, int timeout) {
  if (const int error = next_of(card.wait_errors); error != 0) return error;
  return real<decltype(snd_pcm_wait)>("snd_pcm_wait")(pcm, timeout);
}

snd_pcm_sframes_t snd_pcm_readi(snd_pcm_t* pcm, void* buffer, snd_pcm_uframes_t size) {
  if (const int error = next_of(card.read_errors); error != 0) return error;
  return real<decltype(snd_pcm_readi)>("snd_pcm_readi")(pcm, buffer, size);
}

int snd_pcm_prepare(snd_pcm_t* pcm) {
  if (pcm == card.pcm) {  // ALSA itself calls this for what stands behind
    if (card.prepare_error != 0) return card.prepare_error;
    ++card.prepared;
    snd_pcm_drop(pcm);  // ALSA's own has not been told that anything happened
    if (card.restarted_ns != 0) card.started_ns = card.restarted_ns;
  }
  return real<decltype(snd_pcm_prepare)>("snd_pcm_prepare")(pcm);
}

void snd_pcm_status_get_trigger_htstamp(const snd_pcm_status_t* status, snd_htimestamp_t* time) {
  if (card.started_ns != 0) {
    *time = as_time(card.started_ns);
    return;
  }
  real<decltype(snd_pcm_status_get_trigger_htstamp)>("snd_pcm_status_get_trigger_htstamp")(status, time);
}

void snd_pcm_status_get_htstamp(const snd_pcm_status_t* status, snd_htimestamp_t* time) {
  if (card.place_ns != 0) {
    *time = as_time(card.place_ns);
    return;
  }
  real<decltype(snd_pcm_status_get_htstamp)>("snd_pcm_status_get_htstamp")(status, time);
}

snd_pcm_uframes_t snd_pcm_status_get_avail(const snd_pcm_status_t* status) {
  if (card.waiting) return *card.waiting;
  return real<decltype(snd_pcm_status_get_avail)>("snd_pcm_status_get_avail")(status);
}

}  // extern "C"

namespace tramline::acquire {
namespace {

using std::chrono::milliseconds;
constexpr double kRateHz = 48'000.0;
constexpr std::size_t kFrames = 9600;  // 0.2 s, what one read() takes

#define EXPECT_HAS(text, part) EXPECT_NE((text).find(part), std::string::npos) << (text)

/// Where ALSA reads "samples" from a file, by a configuration with nothing of the system's in it.
class Sound : public ::testing::Test {
 protected:
  Sound() {
    card = {};
    settings_.device = "samples";
    settings_.rate_hz = kRateHz;
  }
  ~Sound() override {
    device_.reset();
    snd_config_update_free_global();
    unsetenv("ALSA_CONFIG_PATH");
    card = {};
  }

  /// A device called "samples" that holds `bytes`. What comes after them is the last ones again.
  void hold(const std::string& bytes) {
    const std::string samples = folder_.write("samples.raw", bytes);
    const std::string configuration =
        folder_.write("asound.conf",
                      "pcm.nothing { type null }\n"
                      "pcm.samples { type file slave.pcm nothing file /dev/null infile \"" +
                          samples + "\" format raw }\n");
    setenv("ALSA_CONFIG_PATH", configuration.c_str(), 1);
  }
  /// "" if it could.
  std::string open(const std::vector<std::string>& source_channels = {"1"}) {
    std::vector<config::ChannelSettings> channels;
    for (const std::string& name : source_channels)
      channels.push_back(wanted(name));
    device_ = make_sound(settings_, channels);
    const std::atomic<bool> stop{false};
    const auto opened = device_->open(stop);
    if (!opened) return opened.error().text();
    info_ = opened.value();
    return "";
  }
  /// What comes next, after at most a few calls in which nothing does.
  Arrival read() {
    Arrival arrival;
    for (int tries = 0; tries < 5; ++tries) {
      arrival.clear();
      const auto came = device_->read(arrival, milliseconds(100));
      if (!came) {
        error_ = came.error().text();
        return {};
      }
      EXPECT_EQ(came.value(), arrival.frames > 0);
      if (came.value()) return arrival;
    }
    error_ = "nothing came";
    return {};
  }

  RecordingFolder folder_;
  config::SoundSettings settings_;
  std::unique_ptr<Device> device_;
  StreamInfo info_;
  std::string error_;
};

/// Three channels of 50 Hz, by their closed form, as shares of full scale.
double sine(std::size_t channel, std::size_t frame) {
  constexpr double kAmplitude[] = {0.9, 0.5, 0.125};
  constexpr double kPhase[] = {0.0, 2.0, -1.0};
  return kAmplitude[channel] *
         std::sin(2.0 * std::numbers::pi * 50.0 * static_cast<double>(frame) / kRateHz + kPhase[channel]);
}

/// `value` as a sample, rounded to the nearest code.
std::string code(snd_pcm_format_t format, double value) {
  const auto whole = [&](int bits) {
    return static_cast<std::int32_t>(std::llround(std::ldexp(value, bits - 1)));
  };
  switch (format) {
    case SND_PCM_FORMAT_S16_LE:
      return little(static_cast<std::int16_t>(whole(16)));
    case SND_PCM_FORMAT_S24_3LE:
      return little(whole(24)).substr(0, 3);
    case SND_PCM_FORMAT_S24_LE:
      return little(whole(24));
    case SND_PCM_FORMAT_S32_LE:
      return little(whole(32));
    default:
      return little_float(static_cast<float>(value));
  }
}

std::string sines(snd_pcm_format_t format, std::size_t channels, std::size_t frames = kFrames) {
  std::string bytes;
  for (std::size_t i = 0; i < frames; ++i) {
    for (std::size_t c = 0; c < channels; ++c)
      bytes += code(format, sine(c, i));
  }
  return bytes;
}

std::int64_t now_ns() {
  timespec now{};
  clock_gettime(CLOCK_MONOTONIC, &now);
  return now.tv_sec * kNsPerSecond + now.tv_nsec;
}

TEST_F(Sound, EveryFormatGivesTheSineThatWasPutIn) {
  struct Row {
    snd_pcm_format_t format;
    int bits;
    const char* said;
  };
  for (const Row& row : {Row{SND_PCM_FORMAT_S16_LE, 16, "16 bit"}, Row{SND_PCM_FORMAT_S24_LE, 24, "24 bit"},
                         Row{SND_PCM_FORMAT_S24_3LE, 24, "24 bit"}, Row{SND_PCM_FORMAT_S32_LE, 32, "32 bit"},
                         Row{SND_PCM_FORMAT_FLOAT_LE, 24, "32 bit floating point"}}) {
    SCOPED_TRACE(snd_pcm_format_name(row.format));
    hold(sines(row.format, 3));
    card.formats = {row.format};
    ASSERT_EQ(open({"1", "2", "3"}), "");
    EXPECT_EQ(info_.what, std::string("sound interface samples, 3 channels, ") + row.said + ", 48000 Hz");
    EXPECT_EQ(info_.rate_hz, kRateHz);
    const Arrival arrival = read();
    ASSERT_EQ(arrival.frames, kFrames) << error_;
    ASSERT_EQ(arrival.values.size(), 3 * kFrames);
    // Half a code, and what a float rounds away.
    const double close = std::ldexp(0.5, 1 - row.bits) + std::ldexp(1.0, -24);
    double worst = 0.0;
    for (std::size_t i = 0; i < kFrames; ++i) {
      for (std::size_t c = 0; c < 3; ++c)
        worst = std::max(worst, std::abs(arrival.values[3 * i + c] - sine(c, i)));
    }
    EXPECT_LE(worst, close);
    EXPECT_TRUE(arrival.over_range.empty());
  }
}

TEST_F(Sound, TheBestFormatThatTheHardwareHasIsTaken) {
  struct Row {
    std::vector<snd_pcm_format_t> formats;
    const char* taken;
  };
  for (const Row& row :
       std::vector<Row>{{{}, ", 32 bit,"},
                        {{SND_PCM_FORMAT_S16_LE, SND_PCM_FORMAT_S32_LE}, ", 32 bit,"},
                        {{SND_PCM_FORMAT_S16_LE, SND_PCM_FORMAT_S24_LE}, ", 24 bit,"},
                        {{SND_PCM_FORMAT_U8, SND_PCM_FORMAT_S16_LE, SND_PCM_FORMAT_S24_3LE}, ", 24 bit,"},
                        {{SND_PCM_FORMAT_S16_LE, SND_PCM_FORMAT_FLOAT_LE}, ", 32 bit floating point,"},
                        {{SND_PCM_FORMAT_U8, SND_PCM_FORMAT_S16_LE}, ", 16 bit,"}}) {
    hold("");
    card.formats = row.formats;
    ASSERT_EQ(open(), "");
    EXPECT_HAS(info_.what, row.taken);
  }
  card.formats = {SND_PCM_FORMAT_U8, SND_PCM_FORMAT_MU_LAW};
  EXPECT_HAS(open(), "cannot give 16, 24 or 32 bit samples");
}

TEST_F(Sound, ChannelsComeInTheOrderOfTheSite) {
  hold(sines(SND_PCM_FORMAT_FLOAT_LE, 3));
  card.formats = {SND_PCM_FORMAT_FLOAT_LE};
  ASSERT_EQ(open({"3", "1"}), "");
  EXPECT_HAS(info_.what, ", 3 channels,");  // as few as hold the third
  const Arrival arrival = read();
  ASSERT_EQ(arrival.values.size(), 2 * kFrames) << error_;
  for (std::size_t i = 0; i < kFrames; ++i) {
    ASSERT_EQ(arrival.values[2 * i], static_cast<float>(sine(2, i)));
    ASSERT_EQ(arrival.values[2 * i + 1], static_cast<float>(sine(0, i)));
  }
}

TEST_F(Sound, ChannelsWithoutANameAreTakenInOrder) {
  hold(sines(SND_PCM_FORMAT_FLOAT_LE, 2));
  card.formats = {SND_PCM_FORMAT_FLOAT_LE};
  ASSERT_EQ(open({"", ""}), "");
  const Arrival arrival = read();
  ASSERT_EQ(arrival.values.size(), 2 * kFrames) << error_;
  EXPECT_EQ(arrival.values[0], static_cast<float>(sine(0, 0)));
  EXPECT_EQ(arrival.values[1], static_cast<float>(sine(1, 0)));
}

TEST_F(Sound, HardwareWithMoreChannelsThanWantedIsTakenAsItIs) {
  std::string bytes;
  for (int i = 0; i < static_cast<int>(kFrames); ++i) {
    for (int c = 0; c < 8; ++c)
      bytes += little(static_cast<std::int16_t>(8 * (i % 1000) + c));
  }
  hold(bytes);
  card.formats = {SND_PCM_FORMAT_S16_LE};
  card.channels_min = card.channels_max = 8;
  ASSERT_EQ(open({"2", "1"}), "");
  EXPECT_HAS(info_.what, ", 8 channels,");
  const Arrival arrival = read();
  ASSERT_EQ(arrival.frames, kFrames) << error_;
  EXPECT_EQ(arrival.values[0], 0x1p-15F);
  EXPECT_EQ(arrival.values[1], 0.0F);
  EXPECT_EQ(arrival.values[2 * 999], 7993 * 0x1p-15F);
  EXPECT_EQ(arrival.values[2 * 999 + 1], 7992 * 0x1p-15F);
}

TEST_F(Sound, AChannelThatTheHardwareDoesNotHaveIsNamed) {
  hold("");
  card.channels_min = 1;
  card.channels_max = 2;
  EXPECT_HAS(open({"1", "3"}), "there is no channel \"3\" in it; it has 1, 2");
}

TEST_F(Sound, FullScaleIsOverRange) {
  std::string bytes;
  for (std::size_t i = 0; i < kFrames; ++i) {
    bytes += little(std::int16_t{100});
    bytes += little(static_cast<std::int16_t>(i == 10 ? -32'768 : i == 11 || i == 500 ? 32'767 : 32'766));
  }
  hold(bytes);
  card.formats = {SND_PCM_FORMAT_S16_LE};
  ASSERT_EQ(open({"2", "1"}), "");
  const Arrival arrival = read();
  ASSERT_EQ(arrival.over_range.size(), 2U) << error_;
  EXPECT_EQ(arrival.over_range[0].channel, 0U);
  EXPECT_EQ(arrival.over_range[0].first_frame, 10U);
  EXPECT_EQ(arrival.over_range[0].frames, 2U);
  EXPECT_EQ(arrival.over_range[1].first_frame, 500U);
  EXPECT_EQ(arrival.over_range[1].frames, 1U);
}

TEST_F(Sound, FramesAreCountedOn) {
  hold(sines(SND_PCM_FORMAT_FLOAT_LE, 1, 3 * kFrames));
  card.formats = {SND_PCM_FORMAT_FLOAT_LE};
  ASSERT_EQ(open(), "");
  std::int64_t before_ns = 0;
  for (std::size_t i = 0; i < 3; ++i) {
    const Arrival arrival = read();
    ASSERT_EQ(arrival.frames, kFrames) << error_;
    EXPECT_EQ(arrival.first, static_cast<std::int64_t>(i * kFrames));
    EXPECT_EQ(arrival.values[0], static_cast<float>(sine(0, i * kFrames)));
    EXPECT_GE(arrival.monotonic_ns, before_ns);
    before_ns = arrival.monotonic_ns;
  }
}

TEST_F(Sound, ARateOtherThanTheOneAskedForIsSaid) {
  hold("");
  ASSERT_EQ(open(), "");
  for (const std::string& remark : info_.remarks)
    EXPECT_EQ(remark.find("asked for"), std::string::npos) << remark;

  card.rate_hz = 44'100;
  ASSERT_EQ(open(), "");
  EXPECT_EQ(info_.rate_hz, 44'100.0);
  EXPECT_TRUE(any_contains(info_.remarks, "the interface gives 44100 Hz where 48000 Hz were asked for"));
}

TEST_F(Sound, ARateThatCannotBeMeasuredIsRefused) {
  hold("");
  card.rate_hz = 100;
  EXPECT_HAS(open(), "360 Hz to 1 MHz can be measured");
}

TEST_F(Sound, SaysWhatASoundInputCannotDo) {
  hold("");
  ASSERT_EQ(open(), "");
  for (const char* part : {"high-pass", "no d.c.", "not calibrated", "automatic gain control"})
    EXPECT_TRUE(any_contains(info_.remarks, part)) << part;
}

TEST_F(Sound, PeriodsAreTwentyMillisecondsAndTheBufferIsAsLongAsItMayBe) {
  hold("");
  ASSERT_EQ(open(), "");
  EXPECT_EQ(card.period_us, 20'000U);
  EXPECT_EQ(card.buffer_us, 2'000'000U);
  card.longest_buffer_us = 340'000;
  ASSERT_EQ(open(), "");
  EXPECT_EQ(card.period_us, 20'000U);
  EXPECT_EQ(card.buffer_us, 340'000U);
}

// ---- time

TEST_F(Sound, AFrameIsStampedWithTheDriversTimeOfItsPlaceInTheBuffer) {
  hold("");
  const std::int64_t base_ns = now_ns() - kNsPerSecond;
  card.started_ns = base_ns - kNsPerSecond;
  card.place_ns = base_ns;
  card.waiting = kFrames + 4800;  // of which 0.1 s is left behind
  ASSERT_EQ(open(), "");
  const Arrival arrival = read();
  ASSERT_EQ(arrival.frames, kFrames) << error_;
  EXPECT_EQ(arrival.monotonic_ns, base_ns - 100 * kNsPerMillisecond);
  // Both clocks are of one instant: they differ as they do now.
  Arrival now;
  stamp(now);
  EXPECT_NEAR(static_cast<double>(arrival.utc_ns - arrival.monotonic_ns),
              static_cast<double>(now.utc_ns - now.monotonic_ns), 1e9);
}

TEST_F(Sound, AStampOfAnotherClockIsNotTaken) {
  hold("");
  const std::int64_t before_ns = now_ns();
  for (const std::int64_t strange_ns : {before_ns + 1'000'000 * kNsPerSecond, std::int64_t{1}}) {
    card.started_ns = strange_ns;
    card.place_ns = strange_ns;
    ASSERT_EQ(open(), "");
    const Arrival arrival = read();
    EXPECT_GE(arrival.monotonic_ns, before_ns);
    EXPECT_LE(arrival.monotonic_ns, now_ns());
  }
}

// ---- trouble

struct Broken {
  int error;
  measure::GapCause cause;
};

TEST_F(Sound, FramesLostByAnOverrunOrASuspendAreCounted) {
  for (const Broken& broken :
       {Broken{-EPIPE, measure::GapCause::overrun}, Broken{-ESTRPIPE, measure::GapCause::samples_lost}}) {
    for (const bool while_waiting : {false, true}) {
      SCOPED_TRACE(std::to_string(broken.error) + (while_waiting ? ", while waiting" : ", while reading"));
      card = {};
      hold("");
      const std::int64_t base_ns = now_ns() - 2 * kNsPerSecond;
      card.started_ns = base_ns - kNsPerSecond;
      card.place_ns = base_ns;
      card.waiting = kFrames;
      (while_waiting ? card.wait_errors : card.read_errors) = {0, broken.error};
      ASSERT_EQ(open(), "");
      EXPECT_EQ(read().first, 0) << error_;
      card.restarted_ns = base_ns + 250 * kNsPerMillisecond;
      card.place_ns = base_ns + 450 * kNsPerMillisecond;
      const int prepared = card.prepared;
      const Arrival after = read();
      EXPECT_EQ(card.prepared, prepared + 1);
      ASSERT_EQ(after.frames, kFrames) << error_;
      // 0.25 s at 48 kHz between the last frame given and the new start.
      EXPECT_EQ(after.first, static_cast<std::int64_t>(kFrames) + 12'000);
      EXPECT_EQ(after.gap, broken.cause);
      card.place_ns += 200 * kNsPerMillisecond;
      EXPECT_EQ(read().first, static_cast<std::int64_t>(2 * kFrames) + 12'000);
    }
  }
}

TEST_F(Sound, AnOverrunLosesAtLeastOneFrame) {
  hold("");
  const std::int64_t base_ns = now_ns() - kNsPerSecond;
  card.started_ns = base_ns - kNsPerSecond;
  card.place_ns = base_ns;
  card.waiting = kFrames;
  card.read_errors = {0, -EPIPE};
  ASSERT_EQ(open(), "");
  card.restarted_ns = base_ns;
  EXPECT_EQ(read().first, 0);
  EXPECT_EQ(read().first, static_cast<std::int64_t>(kFrames) + 1);
}

TEST_F(Sound, WhatCannotBeStartedAnewEnds) {
  hold("");
  card.read_errors = {-EPIPE};
  ASSERT_EQ(open(), "");
  card.prepare_error = -ENODEV;
  EXPECT_EQ(read().frames, 0U);
  EXPECT_HAS(error_, "the sound interface is gone");
}

TEST_F(Sound, WhatIsPulledOutEnds) {
  for (const int error : {-ENODEV, -EIO, -EBADFD}) {
    for (const bool while_waiting : {false, true}) {
      card = {};
      hold("");
      ASSERT_EQ(open(), "");
      (while_waiting ? card.wait_errors : card.read_errors) = {error};
      EXPECT_EQ(read().frames, 0U);
      EXPECT_EQ(
          error_,
          "sound interface samples: the sound interface is gone; see that it is plugged in and powered");
    }
  }
}

TEST_F(Sound, NothingCameIsNoError) {
  hold("");
  ASSERT_EQ(open(), "");
  card.read_errors = {-EAGAIN};
  Arrival arrival;
  const auto came = device_->read(arrival, milliseconds(1));
  ASSERT_TRUE(came.ok());
  EXPECT_FALSE(came.value());
  EXPECT_EQ(read().frames, kFrames);
}

TEST_F(Sound, WhyItCannotBeOpenedIsSaidWithARemedy) {
  struct Row {
    int error;
    const char* what;
    const char* remedy;
  };
  for (const Row& row : {Row{-ENOENT, "there is no such sound input", "input"},
                         Row{-ENODEV, "there is no such sound input", "input"},
                         Row{-EBUSY, "another program has it", "stop the other program"},
                         Row{-EACCES, "this user may not open it", "group audio"},
                         Row{-EPERM, "this user may not open it", "group audio"},
                         Row{-ENOMEM, "cannot be opened: Cannot allocate memory", "input"}}) {
    SCOPED_TRACE(row.error);
    hold("");
    card.open_error = row.error;
    const std::string error = open();
    EXPECT_HAS(error, std::string("sound interface samples: ") + row.what);
    EXPECT_HAS(error, row.remedy);
  }
}

TEST_F(Sound, ANameThatAlsaDoesNotKnowIsNoSoundInput) {
  hold("");
  settings_.device = "no-such-device";
  EXPECT_HAS(open(), "sound interface no-such-device: there is no such sound input");
  settings_.device = "}{";
  EXPECT_HAS(open(), "there is no such sound input");
}

TEST_F(Sound, HardwareThatDoesNotInterleaveIsSentToPlughw) {
  hold("");
  card.interleaved = false;
  const std::string error = open();
  EXPECT_HAS(error, "cannot give its channels interleaved");
  EXPECT_HAS(error, "plughw:1,0");
}

TEST_F(Sound, NothingIsOpenedOnceItIsToStop) {
  hold("");
  const auto device = make_sound(settings_, {wanted("1")});
  const std::atomic<bool> stop{true};
  EXPECT_FALSE(device->open(stop).ok());
}

}  // namespace
}  // namespace tramline::acquire
