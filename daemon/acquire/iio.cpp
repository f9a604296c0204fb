#include "daemon/acquire/iio.hpp"

#include <algorithm>
#include <cerrno>
#include <chrono>
#include <cmath>
#include <cstddef>
#include <cstdio>
#include <deque>
#include <optional>
#include <string>
#include <string_view>
#include <utility>

#include "daemon/acquire/byte_reader.hpp"
#include "daemon/acquire/iio_buffer.hpp"
#include "daemon/acquire/iio_element.hpp"
#include "daemon/acquire/iio_setup.hpp"
#include "daemon/acquire/iio_stamps.hpp"
#include "daemon/acquire/recording.hpp"

namespace tramline::acquire {
namespace {

constexpr std::chrono::milliseconds kStep(100);
constexpr double kBlockS = 0.04;
constexpr std::size_t kLeastBlock = 16;
constexpr double kKernelHoldsS = 1.0;  // so long this program may be held up without a loss
constexpr std::size_t kFewestTransfers = 4;
constexpr double kPatienceS = 5.0;
constexpr double kStudyS = 0.5;  // of stamps, before they are trusted
constexpr std::size_t kLeastStudied = 256;
constexpr double kWindowS = 0.02;
constexpr std::size_t kLeastWindow = 32;
constexpr double kLongestLossS = 60.0;  // what jumps further is no loss but another clock
constexpr const char* kStampClock = "current_timestamp_clock";

std::size_t frames_in(double seconds, double rate_hz, std::size_t at_least) {
  return std::max(at_least, static_cast<std::size_t>(std::llround(seconds * rate_hz)));
}

class Converter : public Device {
 public:
  Converter(const config::IioSettings& settings, std::vector<config::ChannelSettings> channels)
      : settings_(settings), channels_(std::move(channels)), place_{settings.context, ""} {}

  Result<StreamInfo> open(const std::atomic<bool>& stop) override {
    if (auto connected = connect(stop); !connected) return connected.error();
    if (auto chosen = choose_channels(); !chosen) return chosen.error();
    if (stop) return stopped();
    if (!settings_.trigger.empty()) {
      if (auto chosen = choose_trigger(device_, settings_.trigger, place_); !chosen) return chosen.error();
    }
    auto rate = settle_rate(device_, captured_, settings_.rate_hz, place_, info_.remarks);
    if (!rate) return rate.error();
    info_.rate_hz = rate.value();
    if (auto sound = check_rate(info_.rate_hz, place_.text()); !sound) return sound.error();
    if (auto read = read_scales(); !read) return read.error();
    if (stop) return stopped();
    if (auto started = start(); !started) return started.error();
    if (auto seen = see_first_frames(stop); !seen) return seen.error();
    info_.what = "converter " + place_.text() + ", " + formats_ + ", " + rate_text() + " Hz";
    return info_;
  }

  Result<bool> read(Arrival& arrival, std::chrono::milliseconds at_most) override {
    if (give(arrival)) return true;
    if (!failed_) {
      if (auto fetched = fetch(at_most); !fetched) fail(fetched.error());
      if (give(arrival)) return true;
    }
    if (failed_) return *failed_;
    return false;
  }

  [[nodiscard]] std::chrono::milliseconds patience() const override {
    return std::chrono::milliseconds(std::llround(1000.0 * patience_s()));
  }

 private:
  struct Column {
    const iio_channel* channel;
    IioElement element;
    IioScale scale;
  };
  /// What one transfer brought, until it is known what was lost in it.
  struct Transfer {
    Arrival arrival;
    std::int64_t begin = 0;  // frames that came before it
    std::size_t given = 0;   // frames handed over already
  };

  // ---- opening

  [[nodiscard]] Error stopped() const {
    return {place_.text(), "told to stop while it was being opened", ""};
  }

  Status connect(const std::atomic<bool>& stop) {
    IioOpening opening = open_iio_context(settings_.context, stop);
    if (!opening.context) {
      if (opening.error == EINTR) return stopped();
      if (opening.error == ENOSYS || opening.error == EINVAL)
        return Error{place_.text(), "this is no address of a converter that libiio knows",
                     "give local: or ip:ADDRESS"};
      if (place_.local() && (opening.error == ENOENT || opening.error == ENODEV))
        return Error{place_.text(), "this machine has no converter of the kernel's industrial I/O",
                     "see that it is plugged in and its driver loaded: it shows under /sys/bus/iio/devices"};
      return iio_trouble(place_, "cannot be reached", opening.error);
    }
    context_ = std::move(opening.context);
    auto device = find_converter(context_.get(), settings_.device, place_);
    if (!device) return device.error();
    device_ = device.value();
    place_.device = name_of(device_);
    return kDone;
  }

  Status choose_channels() {
    const std::vector<iio_channel*> inputs = inputs_of(device_);
    std::vector<std::string> names;
    for (const iio_channel* channel : inputs)
      names.emplace_back(iio_channel_get_id(channel));
    auto places = columns_for(channels_, names, place_.text());
    if (!places) return places.error();
    for (unsigned i = 0; i < iio_device_get_channels_count(device_); ++i)
      iio_channel_disable(iio_device_get_channel(device_, i));
    for (const std::size_t i : places.value()) {
      iio_channel* channel = inputs[i];
      iio_channel_enable(channel);
      captured_.push_back(channel);
      auto element = IioElement::of(channel, place_.text() + ", " + displayable(names[i]));
      if (!element) return element.error();
      if (element.value().repeat() > 1)
        info_.remarks.push_back(displayable(names[i]) + " gives " + std::to_string(element.value().repeat()) +
                                " values at a time; the first is taken");
      const auto type = iio_channel_get_type(channel);
      if (type != IIO_VOLTAGE && type != IIO_ALTVOLTAGE)
        info_.remarks.push_back(displayable(names[i]) +
                                " is no voltage channel; its values are taken as volts");
      formats_ += (formats_.empty() ? "" : ", ") + displayable(names[i]) + " " + element.value().text();
      columns_.push_back({channel, std::move(element).value(), {}});
    }
    if (iio_channel* channel = stamp_channel_of(device_); channel != nullptr) {
      if (auto element = IioElement::of(channel, place_.text())) {
        iio_channel_enable(channel);
        stamps_.emplace(Column{channel, std::move(element).value(), {}});
      }
    }
    return kDone;
  }

  Status read_scales() {
    for (Column& column : columns_) {
      const std::string id = displayable(iio_channel_get_id(column.channel));
      for (const bool scale : {true, false}) {
        const char* name = scale ? "scale" : "offset";
        if (iio_channel_find_attr(column.channel, name) == nullptr) {
          if (scale)
            info_.remarks.push_back(
                id + " does not say its scale: it gives counts, and the site file's scale is volts a count");
          continue;
        }
        double& into = scale ? column.scale.scale_mv : column.scale.offset;
        if (const int error = -iio_channel_attr_read_double(column.channel, name, &into); error != 0)
          return iio_trouble(place_, std::string("the ") + name + " of " + id + " cannot be read", error);
        if (!std::isfinite(into) || (scale && into == 0.0))
          return Error{place_.text(), std::string("the ") + name + " of " + id + " is no usable number",
                       "see to its driver's settings"};
      }
    }
    return kDone;
  }

  /// Stamps by a clock that nobody sets, where that can be had.
  void choose_stamp_clock() {
    if (!stamps_ || iio_device_find_attr(device_, kStampClock) == nullptr) return;
    char clock[64] = "";
    if (iio_device_attr_read(device_, kStampClock, clock, sizeof clock) > 0 &&
        (std::string_view(clock) == "monotonic" || std::string_view(clock) == "monotonic\n"))
      return;
    if (iio_device_attr_write(device_, kStampClock, "monotonic") < 0)
      info_.remarks.push_back(
          "the converter's stamps follow a clock that can be set; setting it forward may show as lost "
          "samples");
  }

  Status start() {
    block_ = settings_.block_frames != 0 ? static_cast<std::size_t>(settings_.block_frames)
                                         : frames_in(kBlockS, info_.rate_hz, kLeastBlock);
    const auto packed = iio_device_get_sample_size(device_);
    if (packed <= 0)
      return iio_trouble(place_, "the length of its scans cannot be known", static_cast<int>(-packed));
    for (const Column& column : columns_)
      longest_ = std::max(longest_, column.element.bytes());
    if (stamps_) longest_ = std::max(longest_, stamps_->element.bytes());
    // So that a transfer, which libiio counts in packed scans, holds whole ones.
    const std::size_t step = scan_bytes(static_cast<std::size_t>(packed), longest_);
    if (step != static_cast<std::size_t>(packed)) block_ = scan_bytes(block_, step);
    const std::size_t transfers = std::max(
        kFewestTransfers,
        static_cast<std::size_t>(std::ceil(kKernelHoldsS * info_.rate_hz / static_cast<double>(block_))));
    // A context that cannot be told keeps libiio's four. libiio sets the watermark to a transfer itself.
    const bool told = iio_device_set_kernel_buffers_count(device_, static_cast<unsigned>(transfers)) == 0;
    held_s_ = static_cast<double>((told ? transfers : kFewestTransfers) * block_) / info_.rate_hz;
    // A libiio server waits for half as long.
    if (const int error =
            -iio_context_set_timeout(context_.get(), static_cast<unsigned>(2000.0 * patience_s()));
        error != 0 && error != ENOSYS)
      return iio_trouble(place_, "its time limit cannot be set", error);
    choose_stamp_clock();
    IioBufferOpening opening = open_iio_buffer(device_, block_);
    if (opening.buffer) {
      buffer_ = std::move(opening.buffer);
      return kDone;
    }
    const std::string what = "the capture cannot be started";
    const iio_device* trigger = trigger_of(device_);
    if (trigger == nullptr && (opening.error == EINVAL || opening.error == ENODEV)) {
      return Error{place_.text(), what + ": it has no trigger, or cannot capture these channels together",
                   "name a trigger as source.trigger; there are: " + triggers_in(context_.get())};
    }
    if (opening.error == EINVAL)
      return Error{
          place_.text(),
          what + ": it cannot capture these channels together with the trigger " + name_of(trigger),
          "capture other channels, or name another trigger; there are: " + triggers_in(context_.get())};
    return iio_trouble(place_, what, opening.error);
  }

  /// Waits for the first transfer, and for as many stamps as it takes to know what they are worth.
  Status see_first_frames(const std::atomic<bool>& stop) {
    const std::size_t enough = stamps_ ? frames_in(kStudyS, info_.rate_hz, kLeastStudied) : 1;
    const auto deadline =
        std::chrono::steady_clock::now() + patience() +
        std::chrono::milliseconds(std::llround(2000.0 * static_cast<double>(enough) / info_.rate_hz));
    while (came_ < static_cast<std::int64_t>(enough)) {
      if (stop) return stopped();
      if (auto fetched = fetch(kStep); !fetched) return fetched.error();
      if (std::chrono::steady_clock::now() < deadline) continue;
      const iio_device* trigger = trigger_of(device_);
      return Error{place_.text(),
                   came_ == 0 ? "the capture is started, but nothing comes"
                              : "far fewer samples come than its sample rate says",
                   trigger != nullptr ? "see that its trigger " + name_of(trigger) + " fires"
                                      : "see that the converter is powered and clocked"};
    }
    if (!stamps_) {
      info_.remarks.push_back(
          "the converter stamps no samples, so it cannot be known whether any are lost on the way");
      return kDone;
    }
    const StampFindings findings = study_stamps(stamps_seen_);
    if (findings.one_a_frame) {
      watch_.emplace(findings.ns_a_frame, frames_in(kWindowS, info_.rate_hz, kLeastWindow));
      const double stamped_hz = 1e9 / findings.ns_a_frame;
      if (std::abs(stamped_hz / info_.rate_hz - 1.0) > 0.01) {
        char figure[32];
        std::snprintf(figure, sizeof figure, "%.1f", stamped_hz);
        info_.remarks.push_back(std::string("by its time stamps the converter samples at ") + figure + " Hz");
      }
      info_.remarks.push_back("lost samples are told by the converter's time stamps");
      if (auto sound = look_for_losses(); !sound) return sound.error();
    } else {
      info_.remarks.push_back(
          "the converter does not stamp each sample for itself, so it cannot be known whether any are lost "
          "on the way");
    }
    return kDone;
  }

  [[nodiscard]] double patience_s() const {
    return std::max(kPatienceS, 4.0 * static_cast<double>(block_) / std::max(info_.rate_hz, 1.0));
  }

  [[nodiscard]] std::string rate_text() const {
    char text[32];
    std::snprintf(text, sizeof text, "%.6g", info_.rate_hz);
    return text;
  }

  // ---- reading

  void fail(Error error) {
    failed_ = std::move(error);
    if (!watch_) return;
    watch_->finish(losses_);
    wild();
  }

  /// Takes what one transfer brings, if any comes in time.
  Status fetch(std::chrono::milliseconds at_most) {
    IioBuffer::Refill refill = buffer_->wait(at_most);
    if (refill.error != 0) return iio_trouble(place_, "the capture broke off", refill.error);
    if (refill.bytes == 0) return kDone;
    iio_buffer* buffer = buffer_->buffer();
    const std::ptrdiff_t packed = iio_buffer_step(buffer);
    const auto step = static_cast<std::ptrdiff_t>(
        scan_bytes(static_cast<std::size_t>(std::max<std::ptrdiff_t>(packed, 0)), longest_));
    if (step <= 0 || refill.bytes % step != 0)
      return Error{place_.text(), "it gave a part of a scan", "if that goes on, see to its driver"};
    const auto frames = static_cast<std::size_t>(refill.bytes / step);
    note_pause(refill.came.monotonic_ns, frames);

    Transfer transfer;
    transfer.begin = came_;
    transfer.arrival = std::move(refill.came);
    transfer.arrival.frames = frames;
    transfer.arrival.values.resize(frames * columns_.size());
    for (std::size_t c = 0; c < columns_.size(); ++c) {
      const std::byte* sample = first_of(buffer, columns_[c], step, frames);
      if (sample == nullptr) return left_out();
      convert(sample, step, c, transfer.arrival);
    }
    came_ += static_cast<std::int64_t>(frames);
    transfers_.push_back(std::move(transfer));
    if (!stamps_) return kDone;
    const std::byte* stamp = first_of(buffer, *stamps_, step, frames);
    if (stamp == nullptr) return left_out();
    for (std::size_t i = 0; i < frames; ++i, stamp += step)
      stamps_seen_.push_back(stamps_->element.bits_at(stamp));
    return look_for_losses();
  }

  [[nodiscard]] Error left_out() const {
    return {place_.text(), "its scans leave out a channel that was asked for",
            "if that goes on, see to its driver"};
  }

  /// The column's sample in the first of `frames` scans; nullptr if they do not have it.
  static const std::byte* first_of(iio_buffer* buffer, const Column& column, std::ptrdiff_t step,
                                   std::size_t frames) {
    const auto* end = static_cast<const std::byte*>(iio_buffer_end(buffer));
    const auto* first = static_cast<const std::byte*>(iio_buffer_first(buffer, column.channel));
    const auto last = static_cast<std::ptrdiff_t>(frames - 1) * step;
    return end - first >= last + static_cast<std::ptrdiff_t>(column.element.bytes()) ? first : nullptr;
  }

  void convert(const std::byte* sample, std::ptrdiff_t step, std::size_t c, Arrival& arrival) const {
    const Column& column = columns_[c];
    for (std::size_t i = 0; i < arrival.frames; ++i, sample += step) {
      const double count = column.element.count_at(sample);
      arrival.values[i * columns_.size() + c] = static_cast<float>(column.scale.volts(count));
      if (count > column.element.lowest() && count < column.element.highest()) continue;
      const bool goes_on = !arrival.over_range.empty() && arrival.over_range.back().channel == c &&
                           arrival.over_range.back().first_frame + arrival.over_range.back().frames == i;
      if (goes_on) {
        ++arrival.over_range.back().frames;
      } else {
        arrival.over_range.push_back({c, i, 1});
      }
    }
  }

  /// If nobody fetched for as long as the kernel's buffer holds, what is lost behind its content ran over.
  void note_pause(std::int64_t now_ns, std::size_t frames) {
    const double pause_s = static_cast<double>(now_ns - fetched_ns_) / 1e9;
    const double block_s = static_cast<double>(block_) / info_.rate_hz;
    if (came_ > 0 && pause_s > held_s_ - block_s)
      overrun_until_ =
          came_ + static_cast<std::int64_t>(frames) + std::llround((held_s_ + block_s) * info_.rate_hz);
    fetched_ns_ = now_ns;
  }

  Status look_for_losses() {
    if (!watch_) return kDone;
    watch_->take(stamps_seen_, losses_);
    stamps_seen_.clear();
    if (!wild()) return kDone;
    return Error{place_.text(), "the time stamps of its samples jumped by more than a minute",
                 "if that goes on, see to its driver"};
  }

  /// Whether a loss is too long to be one. Then where the frames behind it belong is not known: they are
  /// dropped.
  bool wild() {
    const double longest = kLongestLossS * info_.rate_hz;
    const auto too_long = [&](const StampWatch::Loss& loss) {
      return static_cast<double>(loss.missing) > longest;
    };
    if (std::none_of(losses_.begin(), losses_.end(), too_long)) return false;
    transfers_.clear();
    losses_.clear();
    return true;
  }

  /// Hands over frames of the oldest transfer, up to the next loss.
  bool give(Arrival& arrival) {
    if (transfers_.empty()) return false;
    Transfer& oldest = transfers_.front();
    const std::size_t frames = oldest.arrival.frames;
    const std::int64_t end = oldest.begin + static_cast<std::int64_t>(frames);
    if (watch_ && watch_->judged() < end) return false;
    const std::int64_t at = oldest.begin + static_cast<std::int64_t>(oldest.given);
    measure::GapCause gap = measure::GapCause::samples_lost;
    while (!losses_.empty() && losses_.front().before <= at) {
      lost_ += losses_.front().missing;
      if (at < overrun_until_) gap = measure::GapCause::overrun;
      losses_.pop_front();
    }
    const bool cut = !losses_.empty() && losses_.front().before < end;
    const auto until = cut ? static_cast<std::size_t>(losses_.front().before - oldest.begin) : frames;
    if (oldest.given == 0 && !cut) {
      std::swap(arrival, oldest.arrival);
    } else {
      copy(oldest, until, arrival);
    }
    arrival.first = at + lost_;
    arrival.gap = gap;
    oldest.given = until;
    if (!cut) transfers_.pop_front();
    return true;
  }

  void copy(const Transfer& from, std::size_t until, Arrival& arrival) const {
    const auto width = static_cast<std::ptrdiff_t>(columns_.size());
    const auto values = from.arrival.values.begin();
    arrival.values.assign(values + static_cast<std::ptrdiff_t>(from.given) * width,
                          values + static_cast<std::ptrdiff_t>(until) * width);
    for (const measure::OverRangeSpan& span : from.arrival.over_range) {
      const std::size_t begin = std::max(span.first_frame, from.given);
      const std::size_t end = std::min(span.first_frame + span.frames, until);
      if (begin < end) arrival.over_range.push_back({span.channel, begin - from.given, end - begin});
    }
    arrival.frames = until - from.given;
    arrival.monotonic_ns = from.arrival.monotonic_ns;
    arrival.utc_ns = from.arrival.utc_ns;
  }

  config::IioSettings settings_;
  std::vector<config::ChannelSettings> channels_;
  IioPlace place_;
  StreamInfo info_;
  std::string formats_;
  IioContext context_;
  const iio_device* device_ = nullptr;
  std::vector<iio_channel*> captured_;  // by the site's channels
  std::vector<Column> columns_;         // likewise
  std::optional<Column> stamps_;
  std::size_t block_ = 0;
  std::size_t longest_ = 1;            // bytes of the longest element in a scan
  double held_s_ = 0.0;                // by the kernel's buffer
  std::unique_ptr<IioBuffer> buffer_;  // after the context, which must outlive it
  std::deque<Transfer> transfers_;
  std::vector<std::int64_t> stamps_seen_;  // not taken by the watch yet
  std::optional<StampWatch> watch_;
  std::deque<StampWatch::Loss> losses_;  // not given yet
  std::int64_t came_ = 0;
  std::int64_t lost_ = 0;
  std::int64_t fetched_ns_ = 0;
  std::int64_t overrun_until_ = 0;
  std::optional<Error> failed_;  // given after the frames before it
};

}  // namespace

std::unique_ptr<Device> make_iio(const config::IioSettings& settings,
                                 std::vector<config::ChannelSettings> channels) {
  return std::make_unique<Converter>(settings, std::move(channels));
}

}  // namespace tramline::acquire
