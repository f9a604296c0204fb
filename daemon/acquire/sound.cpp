#include "daemon/acquire/sound.hpp"

#include <alsa/asoundlib.h>

#include <algorithm>
#include <array>
#include <cerrno>
#include <cmath>
#include <cstdio>
#include <fstream>
#include <iterator>
#include <memory>
#include <optional>
#include <string>
#include <utility>

#include "daemon/acquire/recording.hpp"
#include "daemon/acquire/sound_samples.hpp"

namespace tramline::acquire {
namespace {

constexpr unsigned kPeriodUs = 20'000;
constexpr unsigned kLongestBufferUs = 2'000'000;
constexpr double kMostAtOnceS = 0.2;
constexpr unsigned kMostChannels = 64;
constexpr double kRateAsAskedHz = 0.5;
constexpr std::int64_t kOldestStampNs = 60 * kNsPerSecond;  // what is older is of another clock

struct NamedFormat {
  snd_pcm_format_t alsa;
  SoundFormat ours;
};
constexpr std::array kFormats = {NamedFormat{SND_PCM_FORMAT_S32_LE, SoundFormat::s32},
                                 NamedFormat{SND_PCM_FORMAT_S24_LE, SoundFormat::s24},
                                 NamedFormat{SND_PCM_FORMAT_S24_3LE, SoundFormat::s24_3},
                                 NamedFormat{SND_PCM_FORMAT_FLOAT_LE, SoundFormat::f32},
                                 NamedFormat{SND_PCM_FORMAT_S16_LE, SoundFormat::s16}};

struct Closer {
  void operator()(snd_pcm_t* pcm) const { snd_pcm_close(pcm); }
  void operator()(snd_pcm_hw_params_t* params) const { snd_pcm_hw_params_free(params); }
  void operator()(snd_pcm_sw_params_t* params) const { snd_pcm_sw_params_free(params); }
  void operator()(snd_pcm_status_t* status) const { snd_pcm_status_free(status); }
};
template <class T>
using Held = std::unique_ptr<T, Closer>;

template <class T>
Held<T> made(int (*make)(T**)) {
  T* one = nullptr;
  return Held<T>(make(&one) == 0 ? one : nullptr);
}

/// ALSA's own words would go to the terminal; ours say the same where it is read.
void say_nothing(const char*, int, const char*, int, const char*, ...) {}
void keep_alsa_quiet() {
  [[maybe_unused]] static const int set = snd_lib_error_set_handler(say_nothing);
}

std::string devices_there_are() {
  std::ifstream file("/proc/asound/pcm");
  const std::string text{std::istreambuf_iterator<char>(file), {}};
  std::string list;
  for (const std::string& device : capture_devices(text))
    list += (list.empty() ? "inputs here are " : ", ") + device;
  return list.empty() ? "this machine shows no sound input; plug the interface in" : list;
}

class Sound : public Device {
 public:
  Sound(const config::SoundSettings& settings, std::vector<config::ChannelSettings> channels)
      : settings_(settings), what_("sound interface " + settings.device), channels_(std::move(channels)) {}

  Result<StreamInfo> open(const std::atomic<bool>& stop) override {
    keep_alsa_quiet();
    snd_pcm_t* pcm = nullptr;
    if (const int error =
            snd_pcm_open(&pcm, settings_.device.c_str(), SND_PCM_STREAM_CAPTURE, SND_PCM_NONBLOCK);
        error < 0)
      return cannot_open(error);
    pcm_.reset(pcm);
    if (stop) return Error{what_, "is not needed any more", ""};
    status_ = made<snd_pcm_status_t>(snd_pcm_status_malloc);
    if (!status_) return Error{what_, "there is no memory for it", ""};
    if (auto done = choose_hardware(); !done) return done.error();
    if (auto done = choose_software(); !done) return done.error();
    if (const int error = snd_pcm_start(pcm_.get()); error < 0) return gone(error);
    last_ns_ = started_ns();
    return describe();
  }

  Result<bool> read(Arrival& arrival, std::chrono::milliseconds at_most) override {
    if (const int ready = snd_pcm_wait(pcm_.get(), static_cast<int>(at_most.count())); ready <= 0)
      return ready == 0 ? Result<bool>(false) : go_on_after(ready);
    // How many frames the hardware had written, and when: the two belong together.
    if (const int error = snd_pcm_status(pcm_.get(), status_.get()); error < 0) return go_on_after(error);
    const auto had = static_cast<std::int64_t>(snd_pcm_status_get_avail(status_.get()));
    const snd_pcm_sframes_t got = snd_pcm_readi(pcm_.get(), buffer_.data(), most_frames_);
    if (got == 0 || got == -EAGAIN) return false;
    if (got < 0) return go_on_after(static_cast<int>(got));
    append_sound(buffer_, format_, width_, columns_, static_cast<std::size_t>(got), arrival);
    arrival.first = next_;
    arrival.gap = lost_by_;
    next_ += got;
    stamp_last_frame(arrival, had - got);
    return true;
  }

 private:
  // ---- opening

  Status choose_hardware() {
    const Held<snd_pcm_hw_params_t> held = made<snd_pcm_hw_params_t>(snd_pcm_hw_params_malloc);
    snd_pcm_hw_params_t* params = held.get();
    if (params == nullptr) return Error{what_, "there is no memory for it", ""};
    snd_pcm_t* pcm = pcm_.get();
    if (const int error = snd_pcm_hw_params_any(pcm, params); error < 0) return cannot_do("be asked", error);
    // Samples are to be the converter's own.
    if (const int error = snd_pcm_hw_params_set_rate_resample(pcm, params, 0); error < 0)
      return cannot_do("leave the sample rate alone", error);
    if (const int error = snd_pcm_hw_params_set_access(pcm, params, SND_PCM_ACCESS_RW_INTERLEAVED); error < 0)
      return cannot_do("give its channels interleaved", error);
    const auto* const format = std::find_if(kFormats.begin(), kFormats.end(), [&](const NamedFormat& one) {
      return snd_pcm_hw_params_set_format(pcm, params, one.alsa) == 0;
    });
    if (format == kFormats.end()) return cannot_do("give 16, 24 or 32 bit samples", -EINVAL);
    format_ = format->ours;
    if (auto done = choose_channels(params); !done) return done;

    auto whole_hz = static_cast<unsigned>(std::lround(settings_.rate_hz));
    if (const int error = snd_pcm_hw_params_set_rate_near(pcm, params, &whole_hz, nullptr); error < 0)
      return cannot_do("be given a sample rate", error);
    // The period first: the shorter it is, the sooner frames come; the buffer is as long as that leaves it.
    unsigned period_us = kPeriodUs;
    if (const int error = snd_pcm_hw_params_set_period_time_near(pcm, params, &period_us, nullptr); error < 0)
      return cannot_do("be given a period", error);
    unsigned buffer_us = kLongestBufferUs;
    if (const int error = snd_pcm_hw_params_set_buffer_time_near(pcm, params, &buffer_us, nullptr); error < 0)
      return cannot_do("be given a buffer", error);
    if (const int error = snd_pcm_hw_params(pcm, params); error < 0) return cannot_do("be set up", error);

    // Of a divided clock the rate is a fraction; not every driver says it.
    unsigned numerator = 0;
    unsigned denominator = 0;
    const bool exact =
        snd_pcm_hw_params_get_rate_numden(params, &numerator, &denominator) == 0 && denominator > 0;
    rate_hz_ = exact ? static_cast<double>(numerator) / denominator : whole_hz;
    if (auto sound = check_rate(rate_hz_, what_); !sound) return sound;
    most_frames_ = static_cast<snd_pcm_uframes_t>(kMostAtOnceS * rate_hz_);
    buffer_.resize(most_frames_ * width_ * bytes_a_sample(format_));
    return kDone;
  }

  /// As few channels as hold the wanted ones.
  Status choose_channels(snd_pcm_hw_params_t* params) {
    unsigned most = 0;
    if (const int error = snd_pcm_hw_params_get_channels_max(params, &most); error < 0)
      return cannot_do("say how many channels it has", error);
    auto columns = columns_for(channels_, std::vector<std::string>(std::min(most, kMostChannels)), what_);
    if (!columns) return columns.error();
    columns_ = std::move(columns).value();
    unsigned count = 1;
    for (const std::size_t column : columns_)
      count = std::max(count, static_cast<unsigned>(column) + 1);
    int error = snd_pcm_hw_params_set_channels_min(pcm_.get(), params, &count);
    if (error == 0) error = snd_pcm_hw_params_set_channels_first(pcm_.get(), params, &count);
    if (error < 0) return cannot_do("give " + std::to_string(count) + " channels", error);
    width_ = count;
    return kDone;
  }

  Status choose_software() {
    const Held<snd_pcm_sw_params_t> params = made<snd_pcm_sw_params_t>(snd_pcm_sw_params_malloc);
    if (!params) return Error{what_, "there is no memory for it", ""};
    int error = snd_pcm_sw_params_current(pcm_.get(), params.get());
    if (error == 0)
      error = snd_pcm_sw_params_set_tstamp_mode(pcm_.get(), params.get(), SND_PCM_TSTAMP_ENABLE);
    if (error == 0)
      error = snd_pcm_sw_params_set_tstamp_type(pcm_.get(), params.get(), SND_PCM_TSTAMP_TYPE_MONOTONIC);
    if (error == 0) error = snd_pcm_sw_params(pcm_.get(), params.get());
    // An old driver may stamp by another clock or not at all; then the time of reading has to do.
    driver_stamps_ = error == 0;
    return kDone;
  }

  [[nodiscard]] StreamInfo describe() const {
    StreamInfo info;
    char figures[96];
    std::snprintf(figures, sizeof figures, ", %zu channels, %s, %g Hz", width_,
                  std::string(name_of(format_)).c_str(), rate_hz_);
    info.what = what_ + figures;
    info.rate_hz = rate_hz_;
    if (std::abs(rate_hz_ - settings_.rate_hz) > kRateAsAskedHz) {
      char rates[96];
      std::snprintf(rates, sizeof rates, "the interface gives %g Hz where %g Hz were asked for", rate_hz_,
                    settings_.rate_hz);
      info.remarks.emplace_back(rates);
    }
    info.remarks.emplace_back(
        "a sound input has a high-pass, so it sees no d.c. and turns the phase of the fundamental by some "
        "degrees");
    info.remarks.emplace_back(
        "its level is not calibrated, and moves with the mixer's sliders: calibrate, then leave them alone");
    info.remarks.emplace_back(
        "automatic gain control, where the input has one, must be off: it would hide sags and swells");
    return info;
  }

  // ---- time

  /// What the driver stamps, if it does and by the monotonic clock.
  [[nodiscard]] std::optional<std::int64_t> driver_ns(void (*which)(const snd_pcm_status_t*,
                                                                    snd_htimestamp_t*),
                                                      std::int64_t now_ns) const {
    if (!driver_stamps_) return std::nullopt;
    snd_htimestamp_t time{};
    which(status_.get(), &time);
    const std::int64_t ns = std::int64_t{time.tv_sec} * kNsPerSecond + time.tv_nsec;
    if (ns <= 0 || ns > now_ns || now_ns - ns > kOldestStampNs) return std::nullopt;
    return ns;
  }

  /// When the converter was last started; now, if the driver does not say.
  std::int64_t started_ns() {
    Arrival now;
    stamp(now);
    if (snd_pcm_status(pcm_.get(), status_.get()) < 0) return now.monotonic_ns;
    return driver_ns(snd_pcm_status_get_trigger_htstamp, now.monotonic_ns).value_or(now.monotonic_ns);
  }

  /// Stamps the last frame in `arrival` with the driver's time of its place in the buffer, of which `behind`
  /// frames are still to be read.
  ///
  /// What counts is a latency that is always the same. The driver stamps its place when it learns it, in the
  /// interrupt, so the program's own delays are not in it. The delay that snd_pcm_delay() adds for the codec
  /// is left out: it is constant at best and guessed at worst.
  void stamp_last_frame(Arrival& arrival, std::int64_t behind) {
    stamp(arrival);
    std::int64_t last_ns = arrival.monotonic_ns;
    if (const auto place_ns = driver_ns(snd_pcm_status_get_htstamp, arrival.monotonic_ns))
      last_ns = *place_ns - std::llround(static_cast<double>(behind) * 1e9 / rate_hz_);
    last_ns_ = std::max(last_ns_, last_ns);  // time does not go back
    arrival.utc_ns += last_ns_ - arrival.monotonic_ns;
    arrival.monotonic_ns = last_ns_;
  }

  // ---- trouble

  /// After an overrun, or after the computer slept, starts the converter again; anything else ends it. What
  /// was in the buffer is lost with the rest: then the count is a matter of two times.
  Result<bool> go_on_after(int error) {
    if (error != -EPIPE && error != -ESTRPIPE) return gone(error);
    if (const int failed = snd_pcm_prepare(pcm_.get()); failed < 0) return gone(failed);
    if (const int failed = snd_pcm_start(pcm_.get()); failed < 0) return gone(failed);
    count_lost(error == -EPIPE ? measure::GapCause::overrun : measure::GapCause::samples_lost);
    return false;
  }

  /// Counts the frames that would have come between the last one given and the start just made, by the
  /// monotonic clock and the nominal rate, rounded: the driver forgets its count when it is prepared anew.
  /// Right to a few frames: the true rate is some 100 ppm off, and the two stamps are as good as the
  /// driver's. What is left shows as lateness, which the fit of the clock sees to.
  void count_lost(measure::GapCause cause) {
    const std::int64_t started = started_ns();
    const double lost = static_cast<double>(started - last_ns_) / 1e9 * rate_hz_;
    // At least one: what comes next does not follow on what came before.
    next_ += std::max<std::int64_t>(1, std::llround(lost));
    last_ns_ = std::max(last_ns_, started);
    lost_by_ = cause;
  }

  [[nodiscard]] Error gone(int error) const {
    if (error == -ENODEV || error == -EIO || error == -EBADFD)
      return {what_, "the sound interface is gone", "see that it is plugged in and powered"};
    return {what_, std::string("cannot be read: ") + snd_strerror(error), "unplug it and plug it in again"};
  }

  [[nodiscard]] Error cannot_do(const std::string& what, int error) const {
    return {
        what_, "cannot " + what + " (" + snd_strerror(error) + ")",
        "name the hardware itself in source.device, such as hw:1,0, or plughw:1,0 if its samples are of a "
        "form of its own"};
  }

  [[nodiscard]] Error cannot_open(int error) const {
    switch (error) {
      case -ENOENT:
      case -ENODEV:
      case -ENXIO:
      case -EINVAL:
        return {what_, "there is no such sound input", devices_there_are()};
      case -EBUSY:
      case -EAGAIN:
        return {what_, "another program has it", "stop the other program, often the desktop's sound server"};
      case -EACCES:
      case -EPERM:
        return {what_, "this user may not open it", "add the user to the group audio"};
      default:
        return {what_, std::string("cannot be opened: ") + snd_strerror(error), devices_there_are()};
    }
  }

  config::SoundSettings settings_;
  std::string what_;
  std::vector<config::ChannelSettings> channels_;
  Held<snd_pcm_t> pcm_;
  Held<snd_pcm_status_t> status_;
  SoundFormat format_ = SoundFormat::s16;
  std::size_t width_ = 0;             // channels of the device
  std::vector<std::size_t> columns_;  // of the device, by the site's channels
  double rate_hz_ = 0.0;
  bool driver_stamps_ = false;
  snd_pcm_uframes_t most_frames_ = 0;
  std::vector<std::uint8_t> buffer_;
  std::int64_t next_ = 0;
  std::int64_t last_ns_ = 0;  // when the last frame was there
  measure::GapCause lost_by_ = measure::GapCause::samples_lost;
};

}  // namespace

std::unique_ptr<Device> make_sound(const config::SoundSettings& settings,
                                   std::vector<config::ChannelSettings> channels) {
  return std::make_unique<Sound>(settings, std::move(channels));
}

}  // namespace tramline::acquire
