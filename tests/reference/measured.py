"""Runs the measurement core over made-up samples and reads what it says."""
import collections
import os
import subprocess
import tempfile

import numpy as np

Event = collections.namedtuple("Event", "side kind begin end duration_s extreme_v phases reason is_bound")
Aggregate = collections.namedtuple(
    "Aggregate", "channel begin_ns end_ns u_rms_v u_min_v u_max_v blocks measured_ns flagged partial over_range")
Frequency = collections.namedtuple("Frequency", "begin_ns end_ns hz cycles trusted flagged")


class HalfCycles:
    """The half-cycle values of one channel; begins and ends in samples."""

    def __init__(self, lines):
        columns = np.array([line[2:] for line in lines], dtype=float).reshape(-1, 5).T
        self.begin, self.end, self.u_rms_v = columns[:3]
        self.free_running, self.over_range = columns[3:].astype(bool)


class Measured:
    """What the core says of a recording."""

    def __init__(self, text):
        self.text = text
        lines = collections.defaultdict(list)
        for line in text.splitlines():
            fields = line.split(",")
            lines[fields[0]].append(fields)
        by_channel = collections.defaultdict(list)
        for fields in lines["half_cycle"]:
            by_channel[fields[1]].append(fields)
        self.half_cycles = {channel: HalfCycles(of) for channel, of in by_channel.items()}
        self.events = sorted((Event(f[1], f[2], float(f[3]), float(f[4]), int(f[5]) * 1e-9, float(f[6]),
                                    f[7].split("+"), f[8], f[9] == "1") for f in lines["event"]),
                             key=lambda e: (e.side, e.begin, e.kind))
        self.frequencies = [Frequency(int(f[1]), int(f[2]), float(f[3]), int(f[4]), f[5] == "1", f[6] == "1")
                            for f in lines["frequency"]]
        self.coverage_begins = [(int(f[1]), int(f[2]), f[3]) for f in lines["coverage_begin"]]
        self.coverage_ends = [(int(f[1]), int(f[2]), f[3]) for f in lines["coverage_end"]]
        self._aggregates = lines["aggregate"]

    def aggregates(self, interval, channel="input.L1"):
        """The values of one interval (`three_seconds`, `ten_minutes`, `two_hours`) and channel, in order."""
        return [Aggregate(f[2], int(f[3]), int(f[4]), *map(float, f[5:8]), int(f[8]), int(f[9]),
                          *(flag == "1" for flag in f[10:13]))
                for f in self._aggregates if f[1] == interval and f[2] == channel]


class Core:
    """The program `measure_file`. A context: it keeps one temporary file."""

    def __init__(self, program):
        self.program = program
        self.samples_taken = 0

    def __enter__(self):
        handle, self.path = tempfile.mkstemp(prefix="tramline-check-", suffix=".f32")
        os.close(handle)
        return self

    def __exit__(self, *_):
        os.unlink(self.path)

    def run(self, channels, *, rate_hz=6400.0, nominal_hz=50.0, nominal_v=230.0, begin_ns=0, **options):
        """`channels`: name -> float64 volts. Further options go to the program as they are: block_frames=7."""
        interleaved = np.stack([volts.astype(np.float32) for volts in channels.values()], axis=1)
        interleaved.tofile(self.path)
        self.samples_taken += interleaved.size
        return self.run_again(channels, rate_hz=rate_hz, nominal_hz=nominal_hz, nominal_v=nominal_v,
                              begin_ns=begin_ns, **options)

    def run_again(self, channels, **options):
        """As `run()`, on the samples of the run before; only the names of the channels count."""
        command = [self.program, self.path, "--channels", ",".join(channels)]
        for name, value in options.items():
            option = "--" + name.replace("_", "-")
            if value is True:
                command.append(option)
            elif isinstance(value, tuple):
                command += [option, *map(str, value)]
            else:
                command += [option, repr(value)]
        return Measured(subprocess.run(command, check=True, stdout=subprocess.PIPE, text=True).stdout)
