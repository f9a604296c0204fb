#pragma once

#include <cmath>
#include <cstdint>
#include <limits>
#include <optional>
#include <string>
#include <variant>
#include <vector>

#include "config/units.hpp"

/// The records of the logbook: what the measurement core gives and the reader gives back. Plain values, no
/// SQLite. Times are UTC nanoseconds (in an undated session: nanoseconds from the session's first sample);
/// durations are counted in samples. Volts are r.m.s. unless said otherwise. A figure that was not measured
/// is NaN here and NULL in the logbook.
namespace tramline::storage {

inline constexpr double kNotMeasured = std::numeric_limits<double>::quiet_NaN();

/// What keeps the kernel's UTC clock.
enum class ClockTrust : std::uint8_t {
  never_set,     ///< nothing has set it since measuring began, or nothing is known of it
  synchronised,  ///< a time server, or the like, steers it
  holdover,      ///< it was steered and runs by itself now: the bound grows
};

/// How far the time of a record may be trusted.
struct ClockState {
  ClockTrust trust = ClockTrust::never_set;
  std::int64_t error_bound_ns = -1;  ///< bound on the error of the record's time; -1: not known
  friend bool operator==(const ClockState&, const ClockState&) = default;
};

// ---- events ------------------------------------------------------------------------------------------

enum class EventKind : std::uint8_t {
  sag,           ///< dip of IEC 61000-4-30:2015, 5.4
  swell,         ///< 5.4
  interruption,  ///< 5.5
  out_of_band,   ///< the output outside the regulator's band for longer than its grace
};

enum class Origin : std::uint8_t {
  not_judged,  ///< no output, or no regulator described
  supply,      ///< no regulator of this range and speed could have held it
  regulator,   ///< the input stayed correctable
  undecided,
};

enum class EventEnd : std::uint8_t {
  open,       ///< still going on
  recovered,  ///< the voltage came back past threshold and hysteresis
  gap,        ///< samples are missing after it: what followed is not known
  stopped,    ///< measuring was ended in good order while it went on
  cut_off,    ///< the logger stopped without notice; closed at the next start at the last time known
};

/// An excursion. (session, side, kind, begin_sample) tells it from every other.
///
/// A half-cycle value is r.m.s. over one cycle and stands for the instant at which its window begins. The
/// event begins with the first value past the threshold and ends with the first back past threshold and
/// hysteresis; its duration is the distance between the begins of these two windows, in samples. The ends of
/// both windows are kept as well, for readers who count from window begin to window end (one cycle longer).
struct Event {
  Side side = Side::input;
  EventKind kind = EventKind::sag;
  SampleIndex begin_sample;
  UtcNs begin;
  UtcNs begin_window_end;
  EventEnd end_reason = EventEnd::open;
  UtcNs end;  ///< while open: the last time known
  UtcNs end_window_end;
  std::int64_t duration_ns = 0;

  std::uint8_t phases = 0;  ///< bit p: phase p took part
  Phase worst_phase = Phase::l1;
  double extreme_v = kNotMeasured;  ///< residual voltage (lowest half-cycle value) or highest
  bool extreme_is_bound = false;    ///< a sensor stood at its limit: the true extreme lies further out
  double reference_v = 0.0;         ///< U_din
  double threshold_v = 0.0;         ///< out_of_band: the edge of the band that was crossed first
  double hysteresis_v = 0.0;

  Origin origin = Origin::not_judged;
  std::string reason;            ///< the origin in one sentence with figures
  std::optional<bool> held_off;  ///< input events with an output beside: the output stayed in its band
  double input_low_v =
      kNotMeasured;  ///< out_of_band and output events: lowest input half-cycle value meanwhile
  double input_high_v = kNotMeasured;
  double ratio_low = kNotMeasured;  ///< lowest and highest U_out/U_in meanwhile
  double ratio_high = kNotMeasured;

  ClockState clock;
  friend bool operator==(const Event&, const Event&) = default;
};

// ---- aggregates --------------------------------------------------------------------------------------

enum class Interval : std::uint8_t {
  three_seconds,  ///< 150/180 cycles
  ten_minutes,
  two_hours,
};

/// R.m.s. voltage of one channel over one interval: the root of the mean of the squares of its 10/12-cycle
/// values (IEC 61000-4-30:2015, 4.4 and 4.5).
struct Aggregate {
  Interval interval = Interval::ten_minutes;
  Channel channel;
  UtcNs begin;  ///< ten_minutes and two_hours: the tick; three_seconds: the first block's begin
  UtcNs end;
  double u_rms_v = kNotMeasured;
  double u_min_v = kNotMeasured;  ///< lowest half-cycle value that begins in the interval
  double u_max_v = kNotMeasured;
  std::int32_t blocks = 0;       ///< 10/12-cycle values that went in
  std::int64_t measured_ns = 0;  ///< time those cover; an interval is `partial` if this is not all of it
  bool flagged = false;          ///< a sag, swell or interruption falls in it (4.7)
  bool partial = false;
  bool over_range = false;  ///< a sensor stood at its limit: the value is a lower bound
  ClockState clock;
};

/// Power frequency over 10 s of the absolute clock, on the reference channel (5.1).
struct Frequency {
  UtcNs begin;
  UtcNs end;
  double hz = kNotMeasured;
  std::int32_t cycles = 0;  ///< whole cycles counted
  bool trusted = true;      ///< false: the waveform was gone, jumped in phase, or samples were missing
  bool flagged = false;
  ClockState clock;
};

// ---- the regulator -----------------------------------------------------------------------------------

/// Ten minutes of one phase of the regulator, or of a bare side of it, counted in half-cycle values.
struct RegulatorInterval {
  Phase phase = Phase::l1;
  UtcNs begin;  ///< the 10-minute tick
  UtcNs end;
  std::int64_t input_half_cycles = 0;  ///< half-cycle values measured on that side
  std::int64_t output_half_cycles = 0;
  std::int64_t input_in_band = 0;
  std::int64_t output_in_band = 0;
  std::int64_t output_low = 0;  ///< below the band
  std::int64_t output_high = 0;
  std::int64_t pairs = 0;        ///< with both sides known and the input high enough for a ratio
  std::int64_t correctable = 0;  ///< pairs whose input the declared ratio range can bring into the band
  double ratio_min = kNotMeasured;
  double ratio_mean = kNotMeasured;
  double ratio_max = kNotMeasured;
  std::int32_t corrections = 0;
  std::int32_t reversals = 0;
  double travel = 0.0;                  ///< sum of |change of ratio| over the corrections
  double speed_v_per_s = kNotMeasured;  ///< mean over the corrections: output volts a second
  bool partial = false;
};

/// One movement of the servo, seen in the ratio.
struct Correction {
  Phase phase = Phase::l1;
  SampleIndex begin_sample;
  UtcNs begin;
  UtcNs end;
  double ratio_before = 0.0;
  double ratio_after = 0.0;
  double speed_v_per_s = 0.0;  ///< output volts a second, |change of ratio| * U_in / duration
};

// ---- what was measured, and how ----------------------------------------------------------------------

/// One start of the daemon on its source, or one import: what all records up to its end belong to.
struct SessionBegin {
  std::string program;  ///< "tramlined 0.1.0"
  std::string source;   ///< what the source says of itself
  double rate_hz = 0.0;
  bool dated = true;  ///< false: times count from the recording's begin
  UtcNs begin;        ///< of sample 0
  /// Not 0: no samples but r.m.s. readings of a meter, so far apart; "half-cycle values" are readings then.
  std::int64_t readings_every_ns = 0;
};
struct SessionEnd {
  std::string why;
};

/// A stretch of measuring without a hole.
struct CoverageBegin {
  SampleIndex begin_sample;
  UtcNs begin;
  std::string why;  ///< "daemon started", "import began", "after a gap"
};
struct CoverageProgress {  ///< the open stretch reaches at least to here
  UtcNs until;
  std::int64_t measured_ns = 0;  ///< since its begin, counted in samples
};
struct CoverageEnd {
  UtcNs end;
  std::int64_t measured_ns = 0;
  std::string why;  ///< "samples lost: 640 (100 ms)", "stopped", "end of file"
};

/// A waveform kept around an event: all channels, volts, quantised to 1/32767 of each channel's peak.
struct Waveform {
  SampleIndex begin_sample;
  UtcNs begin;
  UtcNs end;
  double rate_hz = 0.0;
  struct Trace {
    Channel channel;
    float volts_per_step = 0.0F;
    std::vector<std::int16_t> steps;
  };
  std::vector<Trace> traces;
};

struct ClockChange {
  UtcNs at;
  std::string what;
  std::int64_t step_ns = 0;
  ClockState after;
};

/// The site file in force from here on.
struct SettingsInForce {
  UtcNs from;
  std::string text;
};

/// The calibration file in force from here on, as text; empty if the sensors have none.
struct CalibrationInForce {
  UtcNs from;
  std::string text;
};

/// Something that was lost on the way to the logbook, so that nobody takes silence for peace.
struct Loss {
  UtcNs at;
  std::string
      what;  ///< "aggregates dropped: the queue was full", "waveform left out: the day's allowance is used"
  std::int64_t count = 0;
};

using Record = std::variant<SessionBegin, SessionEnd, Event, Aggregate, Frequency, RegulatorInterval,
                            Correction, CoverageBegin, CoverageProgress, CoverageEnd, Waveform, ClockChange,
                            SettingsInForce, CalibrationInForce, Loss>;

}  // namespace tramline::storage
