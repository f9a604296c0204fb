#!/usr/bin/env python3
"""Converters of the kernel's industrial I/O through libiio's real interface, without the hardware.

In mount and network namespaces of its own the test makes up what the kernel shows of a converter: the attributes under
/sys/bus/iio, and a FIFO as /dev/iio:device0, into which a thread writes scans of the channels that were enabled once the
buffer is. The scans are composed here from the kernel's documentation (Documentation/driver-api/iio/buffers.rst and
Documentation/ABI/testing/sysfs-bus-iio). Figures are checked against the closed form of the sines in them.

Usage: iio_test.py TAKE_LIVE TRAMLINED
Ends with 77 where no such namespaces are to be had.
"""
import ctypes
import fcntl
import itertools
import json
import math
import os
import pathlib
import re
import select
import shutil
import signal
import socket
import sqlite3
import struct
import subprocess
import sys
import tempfile
import threading
import time
import unittest

TAKE_LIVE, TRAMLINED = sys.argv[1], sys.argv[2]
IIOD = shutil.which("iiod", path="/usr/sbin:/usr/bin:/sbin:/bin")
INSIDE = "TRAMLINE_IIO_TEST_INSIDE"
DEVICES = pathlib.Path("/sys/bus/iio/devices")
NODE = pathlib.Path("/dev/iio:device0")
RATE_HZ = 6400
CYCLE = 128  # frames of 50 Hz
LOCAL, NETWORK = "local:", "ip:127.0.0.1"


# ---- the namespaces -----------------------------------------------------------------------------------------------


def mount(*arguments):
    subprocess.run(["mount", *map(str, arguments)], check=True, capture_output=True)


def make_private():
    """Puts tmpfs where the kernel would show converters, and a /dev in which nodes can be made up."""
    mount("-t", "tmpfs", "none", "/sys/bus/iio" if os.path.isdir("/sys/bus/iio") else "/sys/bus")
    DEVICES.mkdir(parents=True, exist_ok=True)
    folder = pathlib.Path(tempfile.mkdtemp())
    mount("-t", "tmpfs", "none", folder)
    for name in ("null", "zero", "urandom"):
        (folder / name).touch()
        mount("--bind", f"/dev/{name}", folder / name)
    mount("--rbind", folder, "/dev")
    with socket.socket(socket.AF_INET, socket.SOCK_DGRAM) as control:
        up = struct.pack("16sh", b"lo", 1 | 64)  # IFF_UP, IFF_RUNNING
        fcntl.ioctl(control, 0x8914, up)  # SIOCSIFFLAGS


def enter():
    """Runs this program again in namespaces of its own."""
    unshare = shutil.which("unshare")
    if not unshare:
        print("skipped: there is no unshare")
        return 77
    kinds = ["-mn"] if os.getuid() == 0 else ["-rmn"]
    if subprocess.run([unshare, *kinds, "true"], capture_output=True, check=False).returncode != 0:
        print("skipped: no mount namespace is to be had")
        return 77
    return subprocess.run([unshare, *kinds, sys.executable, *sys.argv], env={**os.environ, INSIDE: "1"}, check=False).returncode


# ---- the made-up converter ----------------------------------------------------------------------------------------


class Format:
    """[be|le]:[s|u]bits/storagebits[Xrepeat][>>shift]"""

    def __init__(self, text):
        self.text = text
        end, sign, bits, storage, repeat, shift = re.fullmatch(r"([bl]e):([su])(\d+)/(\d+)(?:X(\d+))?>>(\d+)", text).groups()
        self.order = {"be": "big", "le": "little"}[end]
        self.signed = sign == "s"
        self.bits, self.storage, self.repeat, self.shift = int(bits), int(storage), int(repeat or 1), int(shift)
        self.bytes = self.storage // 8 * self.repeat
        self.highest = (1 << (self.bits - self.signed)) - 1
        self.lowest = -self.highest - 1 if self.signed else 0

    def encode(self, count):
        """The bits beside the value are ones where the value's last is a zero, so that taking them would show."""
        mask = ((1 << self.bits) - 1) << self.shift
        rest = ((1 << self.storage) - 1) & ~mask if count % 2 == 0 else 0
        one = ((count << self.shift) & mask | rest).to_bytes(self.storage // 8, self.order)
        return one + b"\x5a" * (self.bytes - len(one))


def sine(peak, middle=0, lowest=-math.inf, highest=math.inf):
    """Counts of one cycle."""
    return [max(lowest, min(highest, middle + round(peak * math.sin(2 * math.pi * (n + 0.5) / CYCLE)))) for n in range(CYCLE)]


STAMP = Format("le:s64/64>>0")


class Converter:
    """What the kernel shows of a converter, and the thread that scans.

    `counts`: of each channel, one cycle of them. `lose`: {frame: how many are lost before it}. `late`: {frame: ns by which its
    stamp is late}. `pace`: frames a second; None: as fast as they are taken. `end`: frames until it falls silent.
    """

    def __init__(self, formats, counts, stamped=True, scale=None, offset=None, lose=(), late=(), pace=None, end=None, rate=RATE_HZ,
                 stamp_every=1, attributes=()):
        self.formats = [Format(text) for text in formats]
        self.counts, self.stamped, self.rate = counts, stamped, rate
        self.lose, self.late, self.pace, self.end, self.stamp_every = dict(lose), dict(late), pace, end, stamp_every
        self.seen = {}  # at the last start of the buffer
        self.starts = 0
        self.frames = 0  # since then
        self.folder = DEVICES / "iio:device0"
        shutil.rmtree(self.folder, ignore_errors=True)
        for name in ("scan_elements", "buffer"):
            (self.folder / name).mkdir(parents=True)
        attribute = {"name": "meter-adc", "buffer/length": 2, "buffer/enable": 0, "buffer/watermark": 1}
        if rate:
            attribute["sampling_frequency"] = rate
        names = [f"voltage{i}" for i in range(len(formats))]
        # The order of indices is not that of names: the scan follows the index.
        for i, (name, text) in enumerate(zip(names, formats)):
            attribute[f"in_{name}_raw"] = 0
            if scale is not None:
                attribute[f"in_{name}_scale"] = scale
            if offset is not None:
                attribute[f"in_{name}_offset"] = offset
            attribute |= {f"scan_elements/in_{name}_en": 0, f"scan_elements/in_{name}_index": i, f"scan_elements/in_{name}_type": text}
        if stamped:
            attribute |= {"scan_elements/in_timestamp_en": 0, "scan_elements/in_timestamp_index": len(formats),
                          "scan_elements/in_timestamp_type": STAMP.text, "current_timestamp_clock": "realtime"}
        attribute |= dict(attributes)
        for path, value in attribute.items():
            (self.folder / path).parent.mkdir(exist_ok=True)
            (self.folder / path).write_text(f"{value}\n")
        NODE.unlink(missing_ok=True)
        os.mkfifo(NODE)
        self.fifo = os.open(NODE, os.O_RDWR | os.O_NONBLOCK)
        self.over = threading.Event()
        self.thread = threading.Thread(target=self.run)
        self.thread.start()

    def close(self):
        self.over.set()
        self.thread.join()
        os.close(self.fifo)
        NODE.unlink(missing_ok=True)
        shutil.rmtree(self.folder)

    def read(self, path):
        # libiio writes the closing zero too.
        return (self.folder / path).read_text().strip("\n\0")

    def run(self):
        while not self.over.is_set():
            if self.read("buffer/enable") == "1":
                self.seen = {p.relative_to(self.folder).as_posix(): self.read(p.relative_to(self.folder))
                             for p in self.folder.rglob("*") if p.is_file()}
                self.starts += 1
                self.scan()
            time.sleep(0.002)

    def enabled(self, name):
        return self.seen[f"scan_elements/in_{name}_en"] == "1"

    def scans(self):
        """Scans of the enabled channels, each naturally aligned, one after the other."""
        columns = [(f, [f.encode(c) for c in cycle]) for i, (f, cycle) in enumerate(zip(self.formats, self.counts)) if self.enabled(f"voltage{i}")]
        stamped = self.stamped and self.enabled("timestamp")
        time_ns, ns = 1_700_000_000_123_456_789, 1_000_000_000 // (self.rate or RATE_HZ)
        for n in itertools.count() if self.end is None else range(self.end):
            time_ns += ns * (1 + self.lose.get(n, 0))
            scan = b""
            longest = 1
            for f, encoded in columns:
                scan += b"\xa5" * (-len(scan) % f.bytes) + encoded[n % CYCLE]
                longest = max(longest, f.bytes)
            if stamped:
                stamp = time_ns + self.late.get(n, 0) - n % self.stamp_every * ns
                scan += b"\xa5" * (-len(scan) % 8) + STAMP.encode(stamp)
                longest = max(longest, 8)
            yield scan + b"\xa5" * (-len(scan) % longest)

    def scan(self):
        begun = time.monotonic()
        self.frames = 0
        scans = self.scans()
        while not self.over.is_set() and self.read("buffer/enable") == "1":
            piece = list(itertools.islice(scans, 64))  # whole: a FIFO takes up to 4096 bytes at once or not at all
            if not piece:
                time.sleep(0.01)
                continue
            for i in range(0, len(piece), 32):
                data = b"".join(piece[i:i + 32])
                while data and not self.over.is_set() and self.read("buffer/enable") == "1":
                    if select.select([], [self.fifo], [], 0.05)[1]:
                        try:
                            data = data[os.write(self.fifo, data):]
                        except BlockingIOError:
                            time.sleep(0.001)
            self.frames += len(piece)
            if self.pace:
                time.sleep(max(0.0, begun + self.frames / self.pace - time.monotonic()))


# ---- the tests ----------------------------------------------------------------------------------------------------


class Case(unittest.TestCase):
    def setUp(self):
        self.folder = tempfile.TemporaryDirectory()
        self.addCleanup(self.folder.cleanup)
        self.path = pathlib.Path(self.folder.name)

    def converter(self, *arguments, **named):
        converter = Converter(*arguments, **named)
        self.addCleanup(converter.close)
        return converter

    def server(self):
        """The libiio server on loopback, once it answers."""
        if not IIOD:
            self.skipTest("there is no iiod")
        server = subprocess.Popen([IIOD], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        self.addCleanup(server.wait)
        self.addCleanup(server.kill)
        while server.poll() is None:
            with socket.socket() as probe:
                if probe.connect_ex(("127.0.0.1", 30431)) == 0:
                    return server
            time.sleep(0.02)
        self.fail("iiod ended")

    def site(self, context=LOCAL, wanted=("voltage0", "voltage1"), scale=1, **source):
        source = {"kind": "iio", "context": context, "device": "meter-adc", **source}
        channels = [{"side": side, "scale": scale, **({"source_channel": name} if name else {})} for side, name in zip(("input", "output"), wanted)]
        file = self.path / "site.yaml"
        # JSON is YAML.
        file.write_text(json.dumps({"site": {"name": "Test", "zone": "UTC", "nominal_v": 230, "frequency_hz": 50}, "channels": channels,
                                    "logbook": {"path": str(self.path / "logbook")}, "source": source}))
        return file

    def take(self, site, frames=64 * CYCLE, **named):
        done = subprocess.run([TAKE_LIVE, str(site), str(frames)], capture_output=True, text=True, timeout=60, check=False, **named)
        self.assertIn(done.returncode, (0, 1), done.stderr)
        taken = json.loads(done.stdout)
        return taken

    def take_all(self, site, frames=64 * CYCLE):
        taken = self.take(site, frames)
        self.assertIsNone(taken["error"])
        self.assertEqual(taken["frames"], frames)
        return taken

    def error(self, *arguments, **named):
        taken = self.take(*arguments, **named)
        self.assertIsNotNone(taken["error"], taken)
        return "{where}: {what}; {remedy}".format(**taken["error"])

    def assert_sine(self, taken, channel, peak_v, middle_v=0.0, delta=1e-4):
        rms = math.hypot(peak_v / math.sqrt(2), middle_v)
        self.assertAlmostEqual(taken["rms_v"][channel] / rms, 1.0, delta=delta)
        self.assertAlmostEqual(taken["mean_v"][channel], middle_v, delta=delta * peak_v)


FORMATS = ["le:s16/16>>0", "be:s24/32>>8", "le:s12/16>>4", "be:u16/16>>0", "le:s24/32>>0", "le:u12/16>>0", "be:s18/32>>14", "le:s64/64>>0", "le:s16/16X2>>0"]


class Scans(Case):
    def check_formats(self, context):
        for text, stamped in itertools.product(FORMATS, (True, False)):
            with self.subTest(text, stamped=stamped):
                f = Format(text)
                full = min(f.highest, 1 << 23)
                middle = 0 if f.signed else (full + 1) // 2
                peaks = [round(full * share) for share in (0.21, 0.33, 0.47)]
                mv = 0.305175781
                converter = Converter([text] * 3, [sine(p, middle) for p in peaks], stamped, scale=mv, offset=-middle)
                server = self.server() if context == NETWORK else None
                try:
                    # In reverse order, and not all.
                    taken = self.take_all(self.site(context, ("voltage2", "voltage0"), scale=100))
                finally:
                    if server:
                        server.kill()
                    converter.close()
                # A count of rounding each; the volts are single precision.
                for channel, peak in enumerate((peaks[2], peaks[0])):
                    self.assert_sine(taken, channel, peak * mv / 10, delta=max(1e-5, 1.0 / peak))
                self.assertEqual([converter.enabled(f"voltage{i}") for i in range(3)], [True, False, True])
                self.assertEqual((taken["gaps"], taken["over_range"]), ([], []))
                self.assertEqual(taken["rate_hz"], RATE_HZ)
                self.assertIn(f"meter-adc (iio:device0) on {context}", taken["what"])
                self.assertIn(f"voltage2 {text}", taken["what"])
                remarks = " ".join(taken["remarks"])
                self.assertIn("lost samples are told by" if stamped else "it cannot be known whether any are lost", remarks)
                self.assertEqual("the first is taken" in remarks, f.repeat > 1)
                if stamped:
                    self.assertEqual(converter.seen["current_timestamp_clock"], "monotonic")

    def test_every_format_comes_as_the_volts_that_went_in(self):
        self.check_formats(LOCAL)

    def test_every_format_comes_through_a_server_too(self):
        self.check_formats(NETWORK)

    def test_samples_of_unlike_size_are_found_where_the_kernel_aligns_them(self):
        formats = ["le:s8/8>>0", "be:s24/32>>8", "le:s16/16>>0", "le:u8/8>>0", "le:s40/64>>8"]
        peaks = [100, 3_000_000, 20_000, 100, 1 << 30]
        counts = [sine(p, 128 if i == 3 else 0) for i, p in enumerate(peaks)]
        for first, second in itertools.permutations(range(5), 2):
            for stamped in (True, False):
                with self.subTest((formats[first], formats[second]), stamped=stamped):
                    converter = Converter(formats, counts, stamped, scale=1000)
                    try:
                        taken = self.take_all(self.site(wanted=(f"voltage{first}", f"voltage{second}")), 32 * CYCLE)
                    finally:
                        converter.close()
                    for channel, i in enumerate((first, second)):
                        self.assert_sine(taken, channel, peaks[i], 128 if i == 3 else 0, delta=5e-3)

    def test_scans_that_the_kernel_pads_at_their_end_come_through_a_server_too(self):
        self.converter(["be:s24/32>>8", "le:s16/16>>0"], [sine(3_000_000), sine(20_000)], stamped=False, scale=1000)
        self.server()
        taken = self.take_all(self.site(NETWORK))
        self.assert_sine(taken, 0, 3_000_000)
        self.assert_sine(taken, 1, 20_000)

    def test_channels_are_named_by_number_or_taken_in_order(self):
        for wanted, peaks in (((None, None), (10_000, 20_000)), (("3", "1"), (30_000, 10_000))):
            # One converter each: a FIFO, unlike the kernel's buffer, keeps what was left in it.
            converter = Converter(["le:s16/16>>0"] * 3, [sine(p) for p in (10_000, 20_000, 30_000)], scale=1000)
            try:
                taken = self.take_all(self.site(wanted=wanted))
            finally:
                converter.close()
            for channel, peak in enumerate(peaks):
                self.assert_sine(taken, channel, peak)

    def test_offset_and_scale_make_volts_of_counts(self):
        # Check values: (2047 - 2048) * 0.805664062 mV, (3500 - 2048) * 0.805664062 mV; computed by hand.
        self.converter(["le:u12/16>>0"] * 2, [[2047] * CYCLE, [3500] * CYCLE], scale=0.805664062, offset=-2048)
        taken = self.take_all(self.site())
        self.assertAlmostEqual(taken["mean_v"][0], -0.805664e-3, delta=1e-9)
        self.assertAlmostEqual(taken["mean_v"][1], 1.169824, delta=1e-6)

    def test_without_a_scale_counts_are_given_and_said_to_be(self):
        self.converter(["le:s16/16>>0"] * 2, [sine(10_000)] * 2)
        taken = self.take_all(self.site(scale=0.01))
        self.assert_sine(taken, 0, 100)
        self.assertIn("voltage0 does not say its scale", " ".join(taken["remarks"]))

    def test_the_lowest_and_highest_codes_are_over_range(self):
        for text in ("le:s12/16>>4", "be:u16/16>>0", "be:s24/32>>8"):
            with self.subTest(text):
                f = Format(text)
                middle = 0 if f.signed else (f.highest + 1) // 2
                full = f.highest - middle
                clipped = sine(1.2 * full, middle, f.lowest, f.highest)
                converter = Converter([text] * 2, [sine(0.9 * full, middle), clipped], scale=1, offset=-middle)
                try:
                    taken = self.take_all(self.site(), 40 * CYCLE)
                finally:
                    converter.close()
                limits = [n for n in range(40 * CYCLE) if clipped[n % CYCLE] in (f.lowest, f.highest)]
                self.assertGreater(len(limits), 40)
                self.assertEqual(taken["over_range"], [[1, n] for n in limits])


class Losses(Case):
    def test_a_jump_of_the_time_stamps_is_a_gap(self):
        # One after another: within a transfer, at its end, three close together.
        lose = {5000: 1, 5120: 128, 6000: 2, 6002: 3, 6040: 1, 7777: 6400}
        self.converter(["le:s16/16>>0"] * 2, [sine(10_000), sine(20_000)], scale=1000, lose=lose)
        taken = self.take_all(self.site())
        expected, lost = [], 0
        for frame, missing in sorted(lose.items()):
            expected.append({"at": frame + lost, "missing": missing, "overrun": False})
            lost += missing
        self.assertEqual(taken["gaps"], expected)
        self.assertEqual(taken["lost_frames"], lost)
        self.assert_sine(taken, 0, 10_000)

    def test_a_jump_of_the_time_stamps_is_a_gap_behind_a_server_too(self):
        lose = {5000: 7}
        self.converter(["le:s16/16>>0"] * 2, [sine(10_000), sine(20_000)], scale=1000, lose=lose)
        self.server()
        taken = self.take_all(self.site(NETWORK))
        self.assertEqual(taken["gaps"], [{"at": 5000, "missing": 7, "overrun": False}])

    def test_losses_at_once_are_seen_as_well(self):
        self.converter(["le:s16/16>>0"] * 2, [sine(10_000), sine(20_000)], scale=1000, lose={3: 5, 1000: 2})
        taken = self.take_all(self.site())
        self.assertEqual([(g["at"], g["missing"]) for g in taken["gaps"]], [(3, 5), (1005, 2)])

    def test_a_loss_behind_what_the_kernel_held_while_nobody_fetched_is_an_overrun(self):
        converter = self.converter(["le:s16/16>>0"] * 2, [sine(10_000), sine(20_000)], scale=1000, lose={9000: 50}, pace=RATE_HZ)
        program = subprocess.Popen([TAKE_LIVE, str(self.site()), "10000"], stdout=subprocess.PIPE, text=True)
        while converter.frames < RATE_HZ and program.poll() is None:
            time.sleep(0.01)
        program.send_signal(signal.SIGSTOP)
        time.sleep(1.5)  # the kernel's buffer holds a second
        program.send_signal(signal.SIGCONT)
        taken = json.loads(program.communicate(timeout=60)[0])
        self.assertEqual(taken["gaps"], [{"at": 9000, "missing": 50, "overrun": True}])
        self.assertEqual(taken["lost_frames"], 0)

    def test_late_stamps_are_no_loss(self):
        period = 1_000_000_000 // RATE_HZ
        late = {4000: 40 * period, **{5000 + i: (30 - i) * period for i in range(30)}, **{n: n * 7919 % period for n in range(6000, 9000)}}
        self.converter(["le:s16/16>>0"] * 2, [sine(10_000), sine(20_000)], scale=1000, late=late)
        self.assertEqual(self.take_all(self.site(), 80 * CYCLE)["gaps"], [])

    def test_stamps_that_many_samples_share_are_not_trusted(self):
        self.converter(["le:s16/16>>0"] * 2, [sine(10_000), sine(20_000)], scale=1000, stamp_every=16, lose={5000: 40})
        taken = self.take_all(self.site())
        self.assertEqual(taken["gaps"], [])
        self.assertIn("it cannot be known whether any are lost", " ".join(taken["remarks"]))

    def test_stamps_that_jump_an_hour_end_the_source(self):
        self.converter(["le:s16/16>>0"] * 2, [sine(10_000), sine(20_000)], scale=1000, lose={5000: 3600 * RATE_HZ})
        self.assertIn("jumped by more than a minute", self.error(self.site()))


class Settings(Case):
    def test_the_buffer_is_set_up_for_transfers_of_40_ms(self):
        converter = self.converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, scale=1)
        self.take_all(self.site(), 1000)
        self.assertEqual(converter.seen["buffer/watermark"], "256")
        self.assertEqual(converter.seen["buffer/length"], "6400")  # a second
        self.take_all(self.site(block_frames=100), 1000)
        self.assertEqual(converter.seen["buffer/watermark"], "100")

    def test_the_rate_is_set_on_the_converter(self):
        converter = self.converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, stamped=False, scale=1, rate=8000)
        taken = self.take_all(self.site(rate_hz=6400), 1000)
        self.assertEqual(taken["rate_hz"], 6400)
        self.assertEqual(converter.seen["sampling_frequency"], "6400")
        self.assertNotIn("Hz", " ".join(taken["remarks"]))

    def test_the_rate_that_is_read_back_counts(self):
        converter = self.converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, stamped=False, scale=1, rate=8000)
        attribute = converter.folder / "sampling_frequency"
        # A driver that makes 6399.5 of everything: a lease on the file holds who opens it to write until another file, with that
        # in it, has taken its place.
        signal.signal(signal.SIGIO, signal.SIG_IGN)
        with attribute.open(encoding="ascii") as asked:
            fcntl.fcntl(asked, fcntl.F_SETLEASE, fcntl.F_RDLCK)
            program = subprocess.Popen([TAKE_LIVE, str(self.site(rate_hz=6400)), "1000"], stdout=subprocess.PIPE, text=True)
            while fcntl.fcntl(asked, fcntl.F_GETLEASE) == fcntl.F_RDLCK and program.poll() is None:
                time.sleep(0.002)
            made = converter.folder / "made"
            made.write_text("6399.5\n")
            made.rename(attribute)
            fcntl.fcntl(asked, fcntl.F_SETLEASE, fcntl.F_UNLCK)
            taken = json.loads(program.communicate(timeout=60)[0])
            asked.seek(0)
            self.assertEqual(asked.read(), "6400\0")
        self.assertEqual(taken["rate_hz"], 6399.5)
        self.assertIn("the converter made 6399.500000 Hz of the 6400 Hz it was asked for", taken["remarks"])

    def test_channels_have_the_rate_where_the_converter_has_none(self):
        converter = self.converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, stamped=False, scale=1, rate=None,
                                   attributes={"in_voltage0_sampling_frequency": 8000, "in_voltage1_sampling_frequency": 4000})
        self.assertIn("different sample rates", self.error(self.site()))
        self.assertEqual(self.take_all(self.site(rate_hz=6400), 1000)["rate_hz"], 6400)
        self.assertEqual([converter.seen[f"in_voltage{i}_sampling_frequency"] for i in (0, 1)], ["6400", "6400"])

    def test_a_converter_that_says_no_rate_takes_that_of_the_site(self):
        self.converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, stamped=False, scale=1, rate=None)
        self.assertIn("give source.rate_hz", self.error(self.site()))
        taken = self.take_all(self.site(rate_hz=6400), 1000)
        self.assertEqual(taken["rate_hz"], 6400)
        self.assertIn("does not say its sample rate", " ".join(taken["remarks"]))

    def test_stamps_that_tell_another_rate_are_remarked(self):
        self.converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, scale=1, rate=6400, attributes={"sampling_frequency": 7000})
        self.assertIn("by its time stamps the converter samples at 6400.0 Hz", self.take_all(self.site())["remarks"])

    def trigger(self, number, name, rate):
        folder = DEVICES / f"trigger{number}"
        folder.mkdir()
        self.addCleanup(shutil.rmtree, folder)
        (folder / "name").write_text(f"{name}\n")
        (folder / "sampling_frequency").write_text(f"{rate}\n")
        return folder

    def test_the_trigger_asked_for_is_chosen_and_its_rate_counts(self):
        self.trigger(0, "slow-clock", 100)
        fast = self.trigger(1, "fast-clock", 1000)
        converter = self.converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, scale=1, rate=RATE_HZ,
                                   attributes={"trigger/current_trigger": "", "sampling_frequency": 100_000})
        for name in ("fast-clock", "trigger1"):
            taken = self.take_all(self.site(trigger=name, rate_hz=6400), 1000)
            self.assertEqual(converter.seen["trigger/current_trigger"], "fast-clock")
            self.assertEqual((fast / "sampling_frequency").read_text().strip("\0\n"), "6400")
            self.assertEqual(taken["rate_hz"], 6400)
        self.assertEqual(converter.seen["sampling_frequency"], "100000")
        error = self.error(self.site(trigger="faster-clock"))
        self.assertIn('no trigger called "faster-clock"', error)
        self.assertIn("slow-clock (trigger0), fast-clock (trigger1)", error)

    def test_a_rate_too_low_to_measure_with_is_refused(self):
        self.converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, scale=1, rate=100)
        self.assertIn("100", self.error(self.site()))


class Faults(Case):
    def test_what_is_missing_is_named_beside_what_there_is(self):
        self.converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, scale=1)
        error = self.error(self.site(device="other-adc"))
        self.assertIn('no converter called "other-adc"', error)
        self.assertIn("there are: meter-adc (iio:device0)", error)
        error = self.error(self.site(wanted=("voltage0", "voltage7")))
        self.assertIn('no channel "voltage7"', error)
        self.assertIn("1 (voltage0), 2 (voltage1)", error)
        self.assertIn("no address", self.error(self.site(context="nonsense:")))

    def test_a_machine_without_converters_says_so(self):
        self.assertRegex(self.error(self.site()), "no converter of the kernel's industrial I/O|there is none at all")

    def test_a_converter_without_a_buffer_says_so(self):
        converter = self.converter([], [], stamped=False)
        (converter.folder / "in_voltage0_raw").write_text("0\n")
        self.assertIn("no channel that can be captured", self.error(self.site()))

    def test_a_format_that_cannot_be_is_refused(self):
        self.converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, scale=1, attributes={"scan_elements/in_voltage1_type": "le:s20/16>>0"})
        self.assertIn("le:s20/16>>0", self.error(self.site()))

    def test_a_scale_of_nothing_is_refused(self):
        for scale in ("0", "nan", "inf", "much"):
            converter = Converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, scale=scale)
            try:
                self.assertIn("scale of voltage0", self.error(self.site()))
            finally:
                converter.close()

    @unittest.skipIf(os.getuid() != 0 or pathlib.Path("/proc/self/uid_map").read_text().split()[2] == "1", "takes a second user")
    def test_without_rights_the_rule_that_gives_them_is_named(self):
        self.converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, scale=1)
        site = self.site()
        program = pathlib.Path(shutil.copy(TAKE_LIVE, self.path))
        self.path.chmod(0o755)
        done = subprocess.run([program, site, "10"], capture_output=True, text=True, timeout=60, check=False, user=65534, group=65534, extra_groups=[])
        error = json.loads(done.stdout)["error"]
        self.assertIn("Permission denied", error["what"])
        self.assertIn('SUBSYSTEM=="iio", GROUP="tramline", MODE="0660"', error["remedy"])

    def test_a_converter_that_never_scans_is_said_to(self):
        self.converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, scale=1, end=0)
        self.assertIn("nothing comes; see that", self.error(self.site()))

    def test_silence_ends_the_source_after_what_came(self):
        for context in (LOCAL, NETWORK):
            with self.subTest(context):
                converter = Converter(["le:s16/16>>0"] * 2, [sine(10_000)] * 2, scale=1000, end=CYCLE * 40)
                server = self.server() if context == NETWORK else None
                try:
                    taken = self.take(self.site(context), 10**9)
                finally:
                    converter.close()
                    if server:
                        server.kill()
                self.assertRegex(taken["error"]["what"], "nothing has come for 5 s|broke off")
                self.assertGreaterEqual(taken["frames"], CYCLE * 39)  # the last 20 ms were still waiting to be judged
                self.assert_sine(taken, 0, 10_000, delta=0.02)

    def unplugged_after(self, frames):
        """A node that gives so many frames and then an error, as when the converter is unplugged."""
        counts = [sine(10_000), sine(20_000)]
        converter = self.converter(["le:s16/16>>0"] * 2, counts, stamped=False, scale=1000, end=0)
        NODE.unlink()
        one = b"".join(struct.pack("<hh", *pair) for pair in zip(*counts))
        NODE.write_bytes(one * (frames // CYCLE))
        return converter

    def test_an_unplugged_converter_ends_the_source(self):
        self.unplugged_after(20 * CYCLE)
        taken = self.take(self.site(), 10**9)
        self.assertEqual(taken["frames"], 20 * CYCLE)
        self.assertIn("the capture broke off", taken["error"]["what"])
        self.assertIn("plugged in", taken["error"]["remedy"])

    def test_a_server_that_is_gone_ends_the_source(self):
        converter = self.converter(["le:s16/16>>0"] * 2, [sine(10_000)] * 2, scale=1000, pace=RATE_HZ)
        server = self.server()

        def end_it():
            while converter.starts == 0:
                time.sleep(0.01)
            time.sleep(1.5)
            server.kill()

        thread = threading.Thread(target=end_it)
        thread.start()
        taken = self.take(self.site(NETWORK), 10**9)
        thread.join()
        self.assertGreater(taken["frames"], 0)
        self.assertIn("the capture broke off", taken["error"]["what"])
        self.assertIn("iiod", taken["error"]["remedy"])

    def test_a_machine_without_a_server_cannot_be_reached(self):
        error = self.error(self.site(NETWORK))
        self.assertIn("cannot be reached", error)
        self.assertIn("iiod", error)


class TheDaemon(Case):
    def start(self, site):
        daemon = subprocess.Popen([TRAMLINED, str(site)], stderr=subprocess.PIPE, text=True)
        self.addCleanup(daemon.stderr.close)
        self.addCleanup(daemon.kill)
        return daemon

    def wait_for(self, daemon, words):
        lines = ""
        for line in daemon.stderr:
            lines += line
            if words in line:
                return line
        self.fail(f"the daemon ended without saying: {words}\n{lines}")

    def stop(self, daemon):
        daemon.send_signal(signal.SIGTERM)
        self.assertEqual(daemon.wait(60), 0)

    def rows(self, sql):
        database = sqlite3.connect(self.path / "logbook")
        try:
            return database.execute(sql).fetchall()
        finally:
            database.close()

    def check_record(self, context):
        mv = 0.305175781
        peaks = [round(v * math.sqrt(2) * 10 / mv) for v in (230.0, 221.0)]  # behind a divider by 100
        self.converter(["be:s24/32>>8"] * 2, [sine(p) for p in peaks], scale=mv, lose={5 * RATE_HZ: 3200}, pace=RATE_HZ)
        if context == NETWORK:
            self.server()
        daemon = self.start(self.site(context, scale=100))
        self.wait_for(daemon, "source: converter meter-adc (iio:device0) on " + context)
        time.sleep(9)
        self.stop(daemon)
        self.assertEqual(self.rows("SELECT count(*) FROM coverage"), [(2,)])
        ((begin, until), (after, _)) = self.rows("SELECT begin_ns, until_ns FROM coverage ORDER BY begin_ns")
        self.assertAlmostEqual((after - until) / 1e9, 0.5, delta=0.05)
        whole = self.rows("SELECT side, u_rms_v FROM aggregate WHERE u_rms_v IS NOT NULL AND NOT flagged")
        self.assertGreaterEqual(len(whole), 2)
        for side, u_rms_v in whole:
            self.assertAlmostEqual(u_rms_v, (230.0, 221.0)[side], delta=0.05)
        self.assertEqual(self.rows("PRAGMA integrity_check"), [("ok",)])

    def test_the_record_holds_the_volts_and_the_gap(self):
        self.check_record(LOCAL)

    def test_the_record_holds_them_from_a_server_too(self):
        self.check_record(NETWORK)

    def test_a_source_that_failed_is_opened_again(self):
        Faults.unplugged_after(self, 80 * CYCLE)
        daemon = self.start(self.site())
        self.wait_for(daemon, "source: converter")
        self.wait_for(daemon, "the capture broke off")
        self.wait_for(daemon, "opening the source again")
        self.wait_for(daemon, "source: converter")
        self.wait_for(daemon, "the capture broke off")
        self.stop(daemon)
        why = [w for (w,) in self.rows("SELECT why_ended FROM session")]
        self.assertGreaterEqual(len(why), 2)
        self.assertIn("the source failed: the capture broke off", why[0])

    def test_it_stops_while_it_waits_for_the_converter(self):
        for context in (LOCAL, NETWORK):
            with self.subTest(context):
                converter = Converter(["le:s16/16>>0"] * 2, [sine(1000)] * 2, scale=1, end=0)
                server = self.server() if context == NETWORK else None
                try:
                    daemon = self.start(self.site(context))
                    self.wait_for(daemon, "logbook")
                    while converter.starts == 0:
                        time.sleep(0.01)
                    self.stop(daemon)
                finally:
                    converter.close()
                    if server:
                        server.kill()


if __name__ == "__main__":
    if INSIDE not in os.environ:
        sys.exit(enter())
    try:
        make_private()
    except (subprocess.CalledProcessError, OSError) as trouble:
        print("skipped: nothing can be mounted:", trouble)
        sys.exit(77)
    unittest.main(argv=[sys.argv[0], *sys.argv[3:]], verbosity=1)
