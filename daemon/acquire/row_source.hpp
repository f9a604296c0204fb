#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "config/result.hpp"
#include "config/site.hpp"
#include "daemon/acquire/source.hpp"

namespace tramline::acquire {

/// What the row-wise recordings (CSV, COMTRADE) share: rows in, blocks out. Rows without a number, jumps in
/// the numbering and changes of rate become gaps and anchors here.
class RowSource : public Source {
 public:
  [[nodiscard]] const StreamInfo& info() const override { return info_; }
  Result<bool> next(measure::Block& block, std::size_t most_frames) override;

 protected:
  struct Row {
    std::int64_t index = 0;  ///< number of the frame in the stream
    measure::GapCause gap =
        measure::GapCause::samples_lost;  ///< why frames before it are missing, if they are
    bool missing = false;  ///< it holds no number for a wanted channel; or, with `gap` rate_change, its rate
                           ///< cannot be measured
    std::vector<double> raw;     ///< a wanted channel each
    std::vector<bool> at_limit;  ///< empty, or whether the channel stands at the recorder's limit
    std::optional<measure::ClockAnchor> anchor;
  };
  explicit RowSource(const std::vector<config::ChannelSettings>& channels) : channels_(channels) {}

  /// The next row; false at the end.
  /// After an Error it must give it again: the rows before it are given out first.
  virtual Result<bool> read_row(Row& row) = 0;

  [[nodiscard]] std::int64_t missing_rows() const { return missing_; }

  StreamInfo info_;
  std::vector<config::ChannelSettings> channels_;

 private:
  [[nodiscard]] bool finite(const Row& row) const;

  Row row_;
  bool holding_ = false;     // `row_` begins the next block
  std::vector<float> rows_;  // interleaved volts of the block being filled
  std::int64_t expected_ = 0;
  std::int64_t missing_ = 0;
  measure::GapCause missing_before_ =
      measure::GapCause::none;                  // why rows just before are missing, if they are
  std::optional<measure::ClockAnchor> anchor_;  // of a row that was left out
};

}  // namespace tramline::acquire
