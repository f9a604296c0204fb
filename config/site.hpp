#pragma once

#include <cstdint>
#include <map>
#include <optional>
#include <string>
#include <variant>
#include <vector>

#include "config/calibration.hpp"
#include "config/units.hpp"

/// What a site is: plain structs, filled from the YAML site file by `read_site_file()` (site_file.hpp).
/// Every default stands here once, and the site file's documentation repeats it.
namespace tramline::config {

/// One sensor: where its samples come from and how they become volts.
/// volts = (raw + offset) * scale, `raw` being what the source gives (a WAV's ±1, a CSV's number, a COMTRADE
/// channel's own unit, the simulator's volts, a board's volts, an IIO converter's volts, a sound card's ±1, a
/// meter's register).
struct ChannelSettings {
  Channel channel;
  std::string source_channel;  ///< column number from 1, or a name the source knows; empty: the next in order
  double scale = 1.0;
  double offset = 0.0;
  double range_v = 0.0;  ///< |volts| at or above this is over-range; 0: the source's own limit only
};

/// The regulator as its maker and its installer describe it.
struct RegulatorSettings {
  double target_v = 0.0;
  double band_low_v = 0.0;
  double band_high_v = 0.0;
  double ratio_min = 0.0;               ///< lowest U_out/U_in it can reach
  double ratio_max = 0.0;               ///< highest
  std::optional<double> speed_v_per_s;  ///< output volts a second while correcting, at nominal input
  double response_s = 0.05;             ///< sense delay before the motor starts
  double grace_s = 1.0;                 ///< out of band for longer than this is an excursion of its own
  double tolerance_pct = 0.5;           ///< so little beyond the band, in percent of nominal, is no excursion
};

/// Thresholds in percent of the nominal voltage; defaults are those of IEC 61000-4-30 practice.
struct EventSettings {
  double sag_pct = 90.0;
  double swell_pct = 110.0;
  double interruption_pct = 5.0;
  double hysteresis_pct = 2.0;
};

/// How much of the waveform is kept around an event.
struct CaptureSettings {
  double before_ms = 100.0;
  double after_ms = 100.0;
  double longest_ms = 2000.0;  ///< a longer event keeps its begin and its end, not its middle
  double per_day_mb = 50.0;    ///< beyond this, waveforms of the UTC day are left out and counted
};

/// Where the record goes and how long which detail stays. 0 days: for ever (within the size budget).
struct LogbookSettings {
  std::string path;
  double size_budget_mb = 500.0;
  double keep_three_seconds_days = 14.0;
  double keep_ten_seconds_days = 60.0;  ///< 10-s frequency
  double keep_waveforms_days = 365.0;
  double keep_corrections_days = 365.0;
};

/// ---- the simulator ---------------------------------------------------------------------------------

/// The simulated supply when nothing happens to it.
struct GridSettings {
  double voltage_v = 0.0;            ///< r.m.s.; 0: the site's nominal
  double wander_pct = 3.0;           ///< slow wander over the day, peak, percent of voltage_v
  double noise_v = 0.2;              ///< r.m.s. of white noise on each sample
  double frequency_drift_hz = 0.03;  ///< peak of the slow frequency wander
  double sensor_noise_v = 0.05;      ///< r.m.s. of white noise of each sensor
  std::map<int, double> harmonics_pct = {{3, 1.5}, {5, 2.5}, {7, 1.0}};  ///< order -> percent of fundamental
};

/// The simulated servo regulator: constant-speed motor, window comparator behind a sensing filter.
struct ServoSettings {
  double target_v = 0.0;          ///< 0: the site's regulator target
  double comparator_low_v = 0.0;  ///< 0: the site's band
  double comparator_high_v = 0.0;
  double ratio_min = 0.0;  ///< 0: the site's
  double ratio_max = 0.0;
  double speed_v_per_s = 20.0;   ///< output volts a second at nominal input
  double sense_filter_s = 0.05;  ///< first-order time constant of the sensing filter
  double coast_s = 0.0;          ///< the motor runs on for this long when switched off
  double output_impedance_ohm = 0.1;
  double load_a = 5.0;               ///< load current at nominal voltage (resistive)
  double load_step_a = 3.0;          ///< size of the load's random steps; 0: none
  double load_step_every_s = 300.0;  ///< their mean distance
};

/// One line of the simulator's script. Which figures it uses depends on `what`.
struct ScriptedHappening {
  enum class What {
    sag,           ///< grid: voltage times `to_pct`/100 for `lasting_s`
    swell,         ///< grid: the same, above 100
    interruption,  ///< grid: no voltage for `lasting_s`
    level,         ///< grid: ramp to `to_v` within `ramp_s`, hold for `lasting_s`, ramp back within `ramp_s`
    servo_stuck,   ///< the wiper stays where it is
    servo_stuck_at,  ///< the wiper sticks as soon as the ratio passes `ratio` (or comes within 0.002 of it)
    servo_slow,      ///< speed times `factor`
    servo_reversed,  ///< the motor runs the wrong way
    servo_hunting,   ///< the sensing filter's time constant times `factor`
    output_open,     ///< the output is not connected
    load_step,       ///< load current becomes `to_a`
  };
  double at_s = 0.0;  ///< seconds from the begin of the simulation
  What what = What::sag;
  double lasting_s = 0.0;  ///< 0 for a servo fault or a load step: until the end
  double to_pct = 0.0;
  double to_v = 0.0;
  double to_a = 0.0;
  double ramp_s = 0.0;
  double ratio = 0.0;
  double factor = 1.0;
  double phase_deg = 0.0;     ///< point on wave (0: at the upward zero crossing of L1) at which it begins
  std::vector<Phase> phases;  ///< empty: all
};

struct SimulatorSettings {
  double rate_hz = 6400.0;
  std::uint64_t seed = 1;
  bool real_time = true;       ///< false: as fast as it goes
  std::optional<UtcNs> begin;  ///< absent: now, as the daemon starts
  double run_for_s = 0.0;      ///< 0: until stopped
  GridSettings grid;
  ServoSettings servo;
  std::vector<ScriptedHappening> script;  ///< sorted by at_s
};

/// ---- recordings ------------------------------------------------------------------------------------

enum class RecordingFormat { by_name, wav, csv, comtrade };

struct RecordingSettings {
  std::string path;
  RecordingFormat format = RecordingFormat::by_name;
  std::optional<UtcNs> begin;     ///< time of the first sample, over the recording's own
  std::optional<double> rate_hz;  ///< CSV without a time column
  std::string time_column;  ///< CSV: name or number of the time column; empty: none if rate_hz is given, else
                            ///< the first
  bool primary = false;     ///< COMTRADE: take primary values, else secondary
};

/// ---- live sources ----------------------------------------------------------------------------------

/// A converter of the kernel's industrial I/O (IIO), on this machine or behind a network context.
struct IioSettings {
  std::string context = "local:";  ///< libiio's URI: "local:", "ip:192.168.7.2"
  std::string device;              ///< name or id: "ad7606", "iio:device0"
  double rate_hz = 0.0;            ///< 0: as the device stands
  std::string trigger;             ///< name or id; empty: as the device stands
  std::uint64_t block_frames = 0;  ///< frames a transfer (and watermark); 0: about 40 ms
};

/// A board or box that sends board frames (daemon/acquire/BOARD-FRAMES.md).
struct BoardSettings {
  enum class Link { serial, tcp, udp };
  Link link = Link::serial;
  std::string device;            ///< serial: "/dev/ttyACM0"
  std::uint64_t baud = 921'600;  ///< serial; a USB serial port ignores it
  std::string host;              ///< tcp: where the box is. udp: the address to listen on; empty: any
  std::uint64_t port = 0;        ///< tcp: of the box. udp: to listen on
};

/// A sound interface behind isolating sensors, through ALSA.
struct SoundSettings {
  std::string device;         ///< ALSA's name: "hw:1,0"
  double rate_hz = 48'000.0;  ///< as near as the hardware has it
};

/// A transducer that gives r.m.s. values in Modbus registers, asked at intervals.
struct PolledMeterSettings {
  enum class Link { tcp, rtu };
  enum class Parity { none, even, odd };
  Link link = Link::tcp;
  std::string host;              ///< tcp
  std::uint64_t port = 502;      ///< tcp
  std::string device;            ///< rtu: "/dev/ttyUSB0"
  std::uint64_t baud = 9600;     ///< rtu
  Parity parity = Parity::even;  ///< rtu
  std::uint64_t unit = 1;        ///< the meter's address
  double every_s = 1.0;          ///< distance of readings
};

using SourceSettings = std::variant<SimulatorSettings, RecordingSettings, IioSettings, BoardSettings,
                                    SoundSettings, PolledMeterSettings>;

/// ---- the clock -------------------------------------------------------------------------------------

/// Whom to believe about UTC.
struct ClockSettings {
  /// The installer's word for the bound on the kernel clock's error, where something disciplines it that the
  /// kernel does not know of (a precision time protocol, a pulse a second); absent: the kernel's own word.
  std::optional<double> stated_error_ms;
};

/// ---- the site --------------------------------------------------------------------------------------

struct Site {
  std::string name;
  std::string zone = "UTC";               ///< IANA time zone in which people read its times
  double nominal_v = 0.0;                 ///< U_din, r.m.s., phase to neutral
  double nominal_hz = 50.0;               ///< 50 or 60
  int phases = 1;                         ///< 1 or 3
  std::vector<ChannelSettings> channels;  ///< inputs before outputs, L1 before L2 before L3
  std::optional<RegulatorSettings> regulator;
  EventSettings events;
  CaptureSettings capture;
  LogbookSettings logbook;
  SourceSettings source;
  ClockSettings clock;
  std::string text;         ///< the file as read, for the settings history
  Calibration calibration;  ///< of its sensors, from the file beside it; already in `channels`

  /// The lines between which a voltage counts as in band: the regulator's, or sag and swell thresholds
  /// without one.
  struct Band {
    double low_v;
    double high_v;
    [[nodiscard]] bool holds(double volts) const { return volts >= low_v && volts <= high_v; }
    [[nodiscard]] Band widened(double by_v) const { return {low_v - by_v, high_v + by_v}; }
  };
  /// The band with the regulator's tolerance: what lies outside is an excursion, if it lasts.
  [[nodiscard]] Band tolerated_band() const {
    return regulator ? band().widened(regulator->tolerance_pct / 100.0 * nominal_v) : band();
  }
  [[nodiscard]] Band band() const {
    if (regulator) return {regulator->band_low_v, regulator->band_high_v};
    return {events.sag_pct / 100.0 * nominal_v, events.swell_pct / 100.0 * nominal_v};
  }
  [[nodiscard]] bool has(Side side) const {
    for (const auto& c : channels) {
      if (c.channel.side == side) return true;
    }
    return false;
  }
};

}  // namespace tramline::config
