#!/usr/bin/env python3
"""tramlined on live sources: a board over a pseudo-terminal, unplugged and plugged in again; a meter over Modbus TCP.

The frames are made here with struct and zlib, after BOARD-FRAMES.md and not with our own sender, so that description, sender and
receiver are held against each other.

Usage: live_test.py TRAMLINED TRAMLINE
"""
import json
import math
import os
import pathlib
import pty
import signal
import socket
import sqlite3
import struct
import subprocess
import sys
import tempfile
import threading
import time
import tty
import unittest
import zlib

TRAMLINED, TRAMLINE = sys.argv[1], sys.argv[2]
RATE_HZ = 3200
FRAMES = 64
INPUT_V, OUTPUT_V = 188.0, 220.0

SITE = """\
site: {{name: Live test, nominal_v: 220, frequency_hz: 50}}
regulator: {{target_v: 220, band_v: [215, 225], input_v: [160, 270], speed_v_per_s: 20}}
channels:
  - {{side: input, source_channel: mains}}
  - {{side: output, source_channel: load}}
logbook: {{path: {folder}/live.logbook}}
source: {{kind: serial, device: {folder}/board, baud: 115200}}
"""


class Board:
    """A made-up board on a pseudo-terminal; it samples a 50 Hz sine of 188 V at `mains` and 220 V at `load`."""

    def __init__(self, link, begin):
        self.board_end, self.far_end = pty.openpty()
        tty.setraw(self.far_end)
        link.unlink(missing_ok=True)
        link.symlink_to(os.ttyname(self.far_end))
        self.begin, self.sequence, self.sample = begin, 0, 0
        self.skip = 0
        self.unplugged = False
        self.stopped = threading.Event()
        self.thread = threading.Thread(target=self.run)
        self.thread.start()

    def frame(self, kind, payload):
        inside = struct.pack("<BBHH", 1, kind, len(payload), self.sequence) + payload
        self.sequence = (self.sequence + 1) % 65536
        return b"\xa7\x4d" + inside + struct.pack("<I", zlib.crc32(inside))

    def hello(self):
        channels = b"".join(struct.pack("<8sffii", name, 0.02, 0.0, -32768, 32767) for name in (b"load", b"mains"))
        return self.frame(1, struct.pack("<BBHIII32s16s", 2, 1, 0, RATE_HZ * 1000, self.begin, 0, b"live board", b"7") + channels)

    def samples(self):
        counts = []
        for i in range(self.sample, self.sample + FRAMES):
            wave = math.sqrt(2) * math.sin(2 * math.pi * 50 * i / RATE_HZ) / 0.02
            counts += [round(OUTPUT_V * wave), round(INPUT_V * wave)]
        return self.frame(2, struct.pack(f"<IHBB{len(counts)}h", self.sample, FRAMES, 0, 0, *counts))

    def run(self):
        began = time.monotonic()
        try:
            while not self.stopped.is_set():
                if self.sample % (RATE_HZ // FRAMES * FRAMES) == 0:
                    os.write(self.board_end, self.hello())
                if self.skip > 0:
                    self.skip -= 1
                else:
                    os.write(self.board_end, self.samples())
                self.sample += FRAMES
                self.stopped.wait(max(0.0, began + self.sample / RATE_HZ - time.monotonic()))
        except OSError:
            pass

    def lose(self, frames):
        self.skip = frames

    def unplug(self):
        self.stopped.set()
        self.thread.join()
        if not self.unplugged:
            os.close(self.board_end)
            os.close(self.far_end)
        self.unplugged = True


class Meter:
    """A made-up meter: Modbus TCP, function 4 (read input registers), one IEEE 754 single in each two registers.

    Written after the Modbus application protocol specification 1.1b3, 6.4, and the messaging guide for TCP 1.0b, 3.1 (from memory)."""

    def __init__(self):
        self.volts = [230.0, 231.0]
        self.listener = socket.create_server(("127.0.0.1", 0))
        self.port = self.listener.getsockname()[1]
        threading.Thread(target=self.run, daemon=True).start()

    def run(self):
        try:
            connection, _ = self.listener.accept()
            with connection, connection.makefile("rwb") as stream:
                while head := stream.read(12):
                    transaction, protocol, _, unit, function, address, count = struct.unpack(">HHHBBHH", head)
                    registers = struct.pack(">2f", *self.volts)[2 * address : 2 * (address + count)]
                    answer = struct.pack(">BBB", unit, function, len(registers)) + registers
                    stream.write(struct.pack(">HHH", transaction, protocol, len(answer)) + answer)
                    stream.flush()
        except OSError:
            pass

    def close(self):
        self.listener.close()


class Daemon(unittest.TestCase):
    def setUp(self):
        self.folder = tempfile.TemporaryDirectory()
        self.addCleanup(self.folder.cleanup)
        self.path = pathlib.Path(self.folder.name)
        self.logbook = self.path / "live.logbook"
        self.site = self.path / "site.yaml"
        self.site.write_text(SITE.format(folder=self.path))

    def start(self):
        daemon = subprocess.Popen([TRAMLINED, str(self.site)], stderr=subprocess.PIPE, text=True)
        self.addCleanup(daemon.stderr.close)
        self.addCleanup(daemon.kill)
        return daemon

    def wait_for(self, daemon, words):
        for line in daemon.stderr:
            if words in line:
                return line
        return self.fail(f"the daemon ended without saying: {words}")

    def rows(self, sql):
        database = sqlite3.connect(self.logbook)
        try:
            return database.execute(sql).fetchall()
        finally:
            database.close()

    def wait_for_rows(self, sql, count):
        """Until the logbook has so many; the test's own time limit ends a wait in vain."""
        while True:
            try:
                found = self.rows(sql)
            except sqlite3.OperationalError:
                found = []
            if len(found) >= count:
                return found
            time.sleep(0.05)


class ALiveBoard(Daemon):
    def board(self, begin=1):
        board = Board(self.path / "board", begin)
        self.addCleanup(board.unplug)
        return board

    def test_is_measured_survives_lost_frames_and_unplugging_and_goes_on(self):
        board = self.board()
        daemon = self.start()
        self.assertIn("board live board number 7", self.wait_for(daemon, "source: board"))
        self.wait_for_rows("SELECT 1 FROM coverage", 1)
        board.lose(25)
        self.wait_for_rows("SELECT 1 FROM coverage WHERE why_ended LIKE 'samples lost%'", 1)
        time.sleep(7)
        board.unplug()
        self.wait_for(daemon, "the serial port is gone")
        second = self.board(begin=2)
        self.wait_for(daemon, "source: board")
        self.wait_for_rows("SELECT 1 FROM session", 2)
        daemon.send_signal(signal.SIGTERM)
        self.assertEqual(daemon.wait(timeout=60), 0)
        second.unplug()

        lost = self.rows("SELECT why_ended FROM coverage ORDER BY id")
        self.assertEqual(lost[0][0], "samples lost: 1600 samples (500 ms)")
        self.assertIn("the source failed: the serial port is gone", lost[1][0])
        self.assertEqual(lost[-1][0], "told to stop (TERM)")
        # The r.m.s. of a sine is known; a count is 0.02 V, so its rounding is 0.006 V r.m.s.
        values = self.rows("SELECT side, u_rms_v, partial FROM aggregate WHERE interval = 0 AND partial = 0")
        self.assertGreaterEqual(len(values), 2)
        for side, u_rms_v, _ in values:
            self.assertAlmostEqual(u_rms_v, (INPUT_V, OUTPUT_V)[side], delta=0.02)
        # A reader must be told what kept the clock.
        (what,) = self.rows("SELECT what FROM clock_change ORDER BY id LIMIT 1")[0]
        self.assertTrue(what.startswith("the clock at the start: "), what)
        answer = subprocess.run([TRAMLINE, "verdict", "--json", str(self.logbook)], capture_output=True, text=True, timeout=60, check=False)
        self.assertEqual(answer.returncode, 0, answer.stderr)
        verdict = json.loads(answer.stdout)
        self.assertEqual(verdict["answer"], "held")
        # Common practice, no source: 220 V from 188 V is a ratio of 1.17.
        (ratio,) = self.rows("SELECT avg(ratio_mean) FROM regulator_interval")[0]
        self.assertAlmostEqual(ratio, 1.170, delta=0.001)

    def test_that_is_not_there_is_tried_again_and_the_daemon_can_be_stopped_meanwhile(self):
        daemon = self.start()
        self.wait_for(daemon, "there is no such serial port")
        self.wait_for(daemon, "opening the source again")
        daemon.send_signal(signal.SIGTERM)
        self.assertEqual(daemon.wait(timeout=60), 0)


class AMeter(Daemon):
    def test_gives_readings_and_every_answer_says_what_they_cannot_show(self):
        meter = Meter()
        self.addCleanup(meter.close)
        self.site.write_text(
            SITE.format(folder=self.path)
            .replace("mains", "'input:0:f32'")
            .replace("load", "'input:2:f32'")
            .replace("source: {kind: serial", f"source: {{kind: modbus_tcp, host: 127.0.0.1, port: {meter.port}, every: 100ms}}\n#")
            .replace("band_v: [215, 225]", "band_v: [215, 235]")
        )
        daemon = self.start()
        self.wait_for(daemon, "r.m.s.")
        self.wait_for_rows("SELECT 1 FROM session WHERE readings_every_ns = 100000000", 1)
        time.sleep(1)
        meter.volts = [150.0, 150.0]
        self.wait_for_rows("SELECT 1 FROM event WHERE side = 0 AND kind = 0", 1)
        meter.volts = [230.0, 231.0]
        self.wait_for_rows("SELECT 1 FROM event WHERE side = 0 AND kind = 0 AND end_reason = 1", 1)
        daemon.send_signal(signal.SIGTERM)
        self.assertEqual(daemon.wait(timeout=60), 0)

        (extreme_v,) = self.rows("SELECT extreme_v FROM event WHERE side = 0")[0]
        self.assertEqual(extreme_v, 150.0)
        self.assertEqual(self.rows("SELECT count(*) FROM frequency"), [(0,)])
        self.assertEqual(self.rows("SELECT count(*) FROM waveform"), [(0,)])
        self.assertEqual(self.rows("SELECT max(u_max_v) FROM aggregate WHERE side = 1"), [(231.0,)])
        for command in ("verdict", "events"):
            answer = subprocess.run([TRAMLINE, command, str(self.logbook)], capture_output=True, text=True, timeout=60, check=False)
            told = " ".join(answer.stdout.split())
            self.assertIn("Only r.m.s. readings of a meter every 100 ms were taken: a sag or swell shorter than that", told)
        self.assertIn("sag", told)


if __name__ == "__main__":
    unittest.main(argv=[sys.argv[0]])
