#!/usr/bin/env python3
"""Half-cycle r.m.s. and sags of a two-channel 16-bit WAV file, as vectorised NumPy does it. For comparison of speed only.

    half_cycle_numpy.py FILE.wav [--full-scale-v 500] [--nominal-v 230] [--nominal-hz 50]

It does the smallest useful part of what the measurement core does: zero crossings by interpolation on a low-passed and
decimated copy, r.m.s. between each crossing and the second after it with fractional window ends, and sags by threshold and
hysteresis. No aggregates, no frequency, no flags, no polyphase rules, nothing stored. Works in chunks, so that memory does not
grow with the file (apart from the half-cycle values themselves, 200 numbers a second).
"""
import argparse
import time

import numpy as np

CHUNK = 1_000_000  # frames
SPARE = 8          # cycles read again on both sides of a chunk


def open_wav(path):
    """(samples as int16 [frame, channel] on disk, rate). Only what the benchmark writes: PCM, 16 bits, two channels."""
    header = np.fromfile(path, np.uint8, 44).tobytes()
    if header[:4] != b"RIFF" or header[8:16] != b"WAVEfmt " or header[36:40] != b"data":
        raise SystemExit(f"{path}: not a plain WAV file")
    channels, rate = np.frombuffer(header, "<u2", 1, 22)[0], np.frombuffer(header, "<u4", 1, 24)[0]
    if channels != 2 or header[20] != 1 or header[34] != 16:
        raise SystemExit(f"{path}: two channels of 16 bits are wanted")
    return np.memmap(path, "<i2", "r", 44).reshape(-1, 2), float(rate)


class HalfCycles:
    """Half-cycle values of one channel, a chunk at a time; positions count in frames from the chunk's begin."""

    def __init__(self, rate, nominal_hz, least_peak):
        self.period = rate / nominal_hz
        self.row = 1 << int(np.log2(self.period / 16.0))  # samples a row: at least 16 rows a cycle
        cycle = int(round(self.period / self.row))
        k = np.arange(-cycle + 1, cycle)
        # Two cycles of a cosine under a Hann window: a band-pass with nulls at d.c. and at the harmonics.
        self.taps = (0.5 + 0.5 * np.cos(np.pi * k / cycle)) * np.cos(2.0 * np.pi * k / cycle)
        self.taps -= self.taps.mean()
        self.taps = self.taps.astype(np.float32)
        gain = float(np.sum(self.taps * np.cos(2.0 * np.pi * k / cycle)))
        self.least_slope = least_peak * gain * 2.0 * np.pi * self.row / self.period

    def of(self, samples):
        """Begins and r.m.s. values, in units of the samples (float32, a whole number of rows)."""
        rows = samples.reshape(-1, self.row)
        energy = np.concatenate(([0.0], np.cumsum(np.einsum("ij,ij->i", rows, rows), dtype=np.float64)))
        ticks = self.ticks(rows @ np.full(self.row, 1.0 / self.row, np.float32))
        ticks = ticks[(ticks >= 0.0) & (ticks < len(samples) - 1)]
        until = self.energy_until(ticks, samples, rows, energy)
        return ticks[:-2], np.sqrt(np.maximum(0.0, until[2:] - until[:-2]) / (ticks[2:] - ticks[:-2]))

    def ticks(self, means):
        """Zero crossings of the fundamental; where none comes, the grid goes on in equal steps."""
        low = np.convolve(means, self.taps, "same")
        step = low[1:] - low[:-1]
        at = np.flatnonzero(((low[:-1] < 0.0) != (low[1:] < 0.0)) & (np.abs(step) > self.least_slope))
        crossing = (at - low[at] / step[at] + 0.5) * self.row - 0.5
        half = self.period / 2.0
        apart = np.diff(crossing)
        crossing = crossing[np.concatenate(([True], apart > 0.6 * half))]
        parts = np.maximum(1, np.rint(np.diff(crossing) / half).astype(int))
        first = np.repeat(np.cumsum(parts) - parts, parts)
        share = (np.arange(parts.sum()) - first) / np.repeat(parts, parts)
        return np.repeat(crossing[:-1], parts) + share * np.repeat(np.diff(crossing), parts)

    def energy_until(self, at, samples, rows, energy):
        """Sum of the squares before the position, fractions of a sample included."""
        whole = np.floor(at + 0.5).astype(int)  # sample n stands for [n - 0.5, n + 0.5)
        row, within = np.divmod(whole, self.row)
        row = np.minimum(row, len(rows) - 1)
        squares = rows[row] ** 2
        head = np.where(np.arange(self.row) < within[:, None], squares, 0.0).sum(axis=1)
        return energy[row] + head + (at + 0.5 - whole) * samples[np.minimum(whole, len(samples) - 1)].astype(float) ** 2


def sags(u_rms, threshold, recovered):
    """Number of sags: below the threshold until back at `recovered`."""
    state = np.where(u_rms < threshold, 1, np.where(u_rms >= recovered, -1, 0))
    told = np.maximum.accumulate(np.where(state != 0, np.arange(len(state)), 0))
    inside = state[told] == 1
    return int(np.count_nonzero(inside[1:] & ~inside[:-1]) + inside[0])


def main():
    arguments = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    arguments.add_argument("file")
    arguments.add_argument("--full-scale-v", type=float, default=500.0)
    arguments.add_argument("--nominal-v", type=float, default=230.0)
    arguments.add_argument("--nominal-hz", type=float, default=50.0)
    chosen = arguments.parse_args()

    begun = time.perf_counter()
    frames, rate = open_wav(chosen.file)
    volts_a_step = chosen.full_scale_v / 32768.0
    meter = HalfCycles(rate, chosen.nominal_hz, 0.02 * chosen.nominal_v * np.sqrt(2.0) / volts_a_step)
    chunk = CHUNK // meter.row * meter.row
    spare = int(SPARE * meter.period) // meter.row * meter.row
    values = ([], [])
    for start in range(0, len(frames), chunk):
        first = max(0, start - spare)
        end = min(len(frames), start + chunk + spare)
        end -= (end - first) % meter.row
        piece = frames[first:end]
        for channel in (0, 1):
            begin, u_rms = meter.of(piece[:, channel].astype(np.float32))
            begin += first
            values[channel].append(u_rms[(begin >= start) & (begin < start + chunk)])
    found = []
    for of in values:
        u_rms_v = np.concatenate(of) * volts_a_step
        found.append(sags(u_rms_v, 0.90 * chosen.nominal_v, 0.92 * chosen.nominal_v))
    taken = time.perf_counter() - begun
    half_cycles = sum(len(piece) for of in values for piece in of)
    print(f"{taken:.6f} s, {taken * 1e9 / frames.size:.3f} ns a sample, {half_cycles} half-cycle values, "
          f"sags: {found[0]} on channel 1, {found[1]} on channel 2")


if __name__ == "__main__":
    main()
