#!/usr/bin/env python3
"""The benchmark: how fast a recording is imported, beside a plain pass over the same file and beside NumPy.

    run.py --build BUILD [--minutes 98] [--rounds 5]

BUILD is where CMake built the programs, best with CMAKE_BUILD_TYPE=Release. It makes a two-channel recording at 12.8 kHz (about
300 MB, so it stays in the page cache), then times in turn, several times, and takes the shortest of each:

  plain     plain_pass: read(2) and a vectorised sum of squares of each channel; nobody can do less
  import    tramline import FILE --site SITE --into LOGBOOK: everything, the logbook included
  numpy     half_cycle_numpy.py: only half-cycle values and sags

Then instructions a sample of each channel, by callgrind on two short files (the difference, so the start cancels), and the
most memory that tramlined took. What cannot be run is reported as not measured. Nothing is asserted about time.
"""
import argparse
import json
import pathlib
import re
import shutil
import struct
import subprocess
import sys
import tempfile
import time

import numpy as np

HERE = pathlib.Path(__file__).resolve().parent
RATE = 12800
FULL_SCALE_V = 500.0
SITE = """\
site: {{name: Benchmark, nominal_v: 230, frequency_hz: 50}}
regulator: {{target_v: 230, band_pct: 3, input_v: [170, 270]}}
channels:
  - {{side: input, scale: {scale}}}
  - {{side: output, scale: {scale}}}
source: {source}
"""


def one_minute():
    """A minute of input and output: a wandering supply with harmonics, noise and one sag, and what a servo makes of it."""
    t = np.arange(60 * RATE) / RATE
    noise = np.random.default_rng(1)

    def voltage(level):
        phase = 2.0 * np.pi * 50.0 * t
        wave = np.sin(phase) + 0.015 * np.sin(3.0 * phase) + 0.025 * np.sin(5.0 * phase + 2.0) + 0.01 * np.sin(7.0 * phase)
        return level * np.sqrt(2.0) * wave + noise.normal(0.0, 0.2, len(t))

    supply = 228.0 + 7.0 * np.sin(2.0 * np.pi * t / 60.0)
    supply[np.abs(t - 30.1) < 0.1] *= 0.7
    load = np.clip(supply * 230.0 / 228.0, 224.0, 236.0)
    load[np.abs(t - 30.1) < 0.1] = 0.72 * 230.0
    volts = np.stack([voltage(supply), voltage(load)], axis=1)
    return np.rint(volts / FULL_SCALE_V * 32768.0).clip(-32768, 32767).astype("<i2")


def write_wav(path, minute, seconds):
    frames = round(seconds * RATE)
    size = frames * 4
    with open(path, "wb") as file:
        file.write(struct.pack("<4sI4s4sIHHIIHH4sI", b"RIFF", 36 + size, b"WAVE", b"fmt ", 16, 1, 2, RATE, RATE * 4, 4, 16,
                               b"data", size))
        for first in range(0, frames, len(minute)):
            minute[:min(len(minute), frames - first)].tofile(file)
    return frames


def write_site(path, source):
    path.write_text(SITE.format(scale=FULL_SCALE_V if "recording" in source else 1, source=source))
    return path


class Bench:
    def __init__(self, build, work):
        self.work = work
        self.tramline = self.program(build, "tramline")
        self.tramlined = self.program(build, "tramlined")
        self.plain = self.program(build, "plain_pass") or self.compiled("plain_pass")
        self.site = write_site(work / "site.yaml", "{kind: recording, path: bench.wav}")

    @staticmethod
    def program(build, name):
        path = build / name
        return path if path.is_file() else None

    def compiled(self, name):
        compiler = shutil.which("c++")
        if not compiler:
            return None
        subprocess.run([compiler, "-std=c++20", "-O3", HERE / f"{name}.cpp", "-o", self.work / name], check=True)
        return self.work / name

    def import_command(self, wav):
        logbook = self.work / "bench.logbook"
        for old in self.work.glob("bench.logbook*"):
            old.unlink()
        return [self.tramline, "import", wav, "--site", self.site, "--into", logbook]

    def ways(self, wav):
        """name -> a function that gives the command; absent where a program is."""
        ways = {}
        if self.plain:
            ways["plain"] = lambda: [self.plain, wav]
        if self.tramline:
            ways["import"] = lambda: self.import_command(wav)
        ways["numpy"] = lambda: [sys.executable, HERE / "half_cycle_numpy.py", wav, "--full-scale-v", str(FULL_SCALE_V)]
        return ways

    def instructions(self, wav):
        """Instructions that the import of this file takes, all threads; None without callgrind."""
        if not (self.tramline and shutil.which("valgrind")):
            return None
        out = self.work / "callgrind.out"
        subprocess.run(["valgrind", "--tool=callgrind", f"--callgrind-out-file={out}", *self.import_command(wav)], check=True,
                       stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        return int(re.search(r"^(?:summary|totals): (\d+)", out.read_text(), re.M).group(1))

    def peak_memory_mib(self, source):
        """The most memory tramlined had resident while it ran on this source; None without the program."""
        if not self.tramlined:
            return None
        site = write_site(self.work / "simulated.yaml", source)
        with site.open("a") as file:
            file.write("logbook: {path: simulated.logbook}\n")
        process = subprocess.Popen([self.tramlined, site], stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, text=True)
        peak_kib = 0
        while process.poll() is None:
            # The peak that wait4() reports would begin with that of this Python.
            try:
                status = pathlib.Path(f"/proc/{process.pid}/status").read_text()
            except OSError:
                break
            found = re.search(r"^Name:\s+(\S+)$.*^VmHWM:\s+(\d+)", status, re.M | re.S)
            if found and found.group(1) == "tramlined":
                peak_kib = max(peak_kib, int(found.group(2)))
            time.sleep(0.01)
        complaint = process.communicate()[1]
        if process.returncode != 0:
            print(f"tramlined ended with {process.returncode}: {complaint.strip()}")
            return None
        return peak_kib / 1024.0


def timed(command):
    """(seconds from start to end of the program, what it printed)."""
    begin = time.perf_counter()
    done = subprocess.run(command, check=False, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    taken = time.perf_counter() - begin
    if done.returncode not in (0, 1):  # 1: answered, and the answer is bad
        raise SystemExit(f"{command[0]} ended with {done.returncode}: {done.stderr.strip()}")
    return taken, done.stdout


def compare_times(bench, wav, samples, rounds):
    ways = bench.ways(wav)
    shortest = dict.fromkeys(ways, float("inf"))
    printed = {}
    for _ in range(rounds):
        for name, command in ways.items():
            taken, printed[name] = timed(command())
            shortest[name] = min(shortest[name], taken)
    print(f"\nshortest of {rounds} rounds, whole program, start included:")
    for name in ("plain", "import", "numpy"):
        if name in shortest:
            print(f"  {name:<8} {shortest[name]:8.3f} s   {shortest[name] * 1e9 / samples:7.3f} ns a sample of a channel")
        else:
            print(f"  {name:<8} not measured: no such program")
    for above, below in (("import", "plain"), ("numpy", "import")):
        if above in shortest and below in shortest:
            print(f"  {above} / {below} = {shortest[above] / shortest[below]:.2f}")
    print(f"\n  numpy says: {printed['numpy'].strip()}")
    if "import" in printed:
        events = timed([bench.tramline, "events", bench.work / "bench.logbook", "--json"])[1]
        found = [json.loads(line) for line in events.splitlines() if line.startswith("{")]
        kinds = {}
        for event in found:
            key = f"{event.get('side')} {event.get('kind')}"
            kinds[key] = kinds.get(key, 0) + 1
        print(f"  the logbook holds: {kinds}")


def count_instructions(bench, minute):
    short_s, long_s = 20, 80
    counts = []
    for seconds in (short_s, long_s):
        wav = bench.work / "short.wav"
        write_wav(wav, minute, seconds)
        counts.append(bench.instructions(wav))
    if None in counts:
        print("instructions: not measured (no tramline, or no valgrind)")
        return
    a_sample = (counts[1] - counts[0]) / ((long_s - short_s) * RATE * 2)
    print(f"instructions of the import: {a_sample:.2f} a sample of a channel (callgrind, {short_s} s against {long_s} s, 12.8 kHz)")


def measure_memory(bench):
    for what, source in (("20 s in real time", "{kind: simulator, rate_hz: 6400, run_for: 20s}"),
                         ("2 h as fast as it goes", "{kind: simulator, rate_hz: 6400, run_for: 2h, real_time: false}")):
        for old in bench.work.glob("simulated.logbook*"):
            old.unlink()
        peak = bench.peak_memory_mib(source)
        shown = "not measured" if peak is None else f"{peak:.1f} MiB resident at most"
        print(f"tramlined, 2 channels, 6.4 kHz simulator, {what}: {shown}")


def main():
    arguments = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    arguments.add_argument("--build", type=pathlib.Path, required=True, help="folder of the built programs")
    arguments.add_argument("--minutes", type=float, default=98.0, help="length of the recording; 98 minutes are 301 MB")
    arguments.add_argument("--rounds", type=int, default=5)
    arguments.add_argument("--work", type=pathlib.Path, help="folder for the files; absent: a temporary one")
    chosen = arguments.parse_args()
    with tempfile.TemporaryDirectory(prefix="tramline-bench-", dir=chosen.work) as folder:
        bench = Bench(chosen.build.resolve(), pathlib.Path(folder))
        minute = one_minute()
        wav = bench.work / "bench.wav"
        samples = 2 * write_wav(wav, minute, chosen.minutes * 60.0)
        print(f"{chosen.minutes:g} min, 2 channels, {RATE} Hz, {samples * 2 / 1e6:.0f} MB, {samples / 1e6:.1f} million samples")
        compare_times(bench, wav, samples, chosen.rounds)
        print()
        count_instructions(bench, minute)
        measure_memory(bench)


if __name__ == "__main__":
    main()
