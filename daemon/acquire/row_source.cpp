#include "daemon/acquire/row_source.hpp"

#include <cmath>

namespace tramline::acquire {

namespace {

/// The same clock, anchored at a later sample: the row that bore the anchor was left out.
measure::ClockAnchor moved(const measure::ClockAnchor& anchor, SampleIndex to) {
  const double seconds = static_cast<double>(to - anchor.at) / anchor.rate_hz;
  return {to, anchor.utc + std::llround(seconds * 1e9), anchor.rate_hz};
}

}  // namespace

bool RowSource::finite(const Row& row) const {
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    const double volts = (row.raw[c] + channels_[c].offset) * channels_[c].scale;
    if (!std::isfinite(static_cast<float>(volts))) return false;
  }
  return true;
}

Result<bool> RowSource::next(measure::Block& block, std::size_t most_frames) {
  const std::size_t width = channels_.size();
  rows_.clear();
  std::size_t frames = 0;
  measure::Block shape;
  while (frames < most_frames) {
    if (!holding_) {
      row_.anchor.reset();
      const auto more = read_row(row_);
      if (!more) {
        if (frames == 0) return more.error();
        break;  // what came before is given first; the error comes again with the next call
      }
      if (!more.value()) break;
      if (row_.anchor) anchor_ = row_.anchor;
      if (row_.missing || !finite(row_)) {
        ++missing_;
        missing_before_ =
            row_.gap == measure::GapCause::rate_change ? row_.gap : measure::GapCause::not_a_number;
        continue;
      }
    }
    if (frames > 0 && (row_.index != expected_ || anchor_)) {
      holding_ = true;
      break;
    }
    if (frames == 0) {
      shape.first = {row_.index};
      shape.gap = row_.index == expected_                      ? measure::GapCause::none
                  : missing_before_ != measure::GapCause::none ? missing_before_
                                                               : row_.gap;
      if (anchor_) shape.anchor = moved(*anchor_, shape.first);
      anchor_.reset();
      missing_before_ = measure::GapCause::none;
    }
    for (std::size_t c = 0; c < width; ++c) {
      const double volts = (row_.raw[c] + channels_[c].offset) * channels_[c].scale;
      const bool limit = (!row_.at_limit.empty() && row_.at_limit[c]) ||
                         (channels_[c].range_v > 0.0 && std::abs(volts) >= channels_[c].range_v);
      if (limit) shape.over_range.push_back({c, frames, 1});
      rows_.push_back(static_cast<float>(volts));
    }
    holding_ = false;
    expected_ = row_.index + 1;
    ++frames;
  }
  if (frames == 0) return false;
  block.resize(width, frames);
  block.begin(shape.first);
  block.gap = shape.gap;
  block.anchor = shape.anchor;
  block.over_range = shape.over_range;
  for (std::size_t c = 0; c < width; ++c) {
    const auto volts = block.channel(c);
    for (std::size_t i = 0; i < frames; ++i)
      volts[i] = rows_[i * width + c];
  }
  return true;
}

}  // namespace tramline::acquire
