#!/usr/bin/env python3
"""The two programs as their users meet them: tramlined by signals and exit codes, tramline by what it prints.

Usage: daemon_test.py TRAMLINED TRAMLINE
"""
import json
import os
import pathlib
import signal
import sqlite3
import subprocess
import sys
import tempfile
import unittest

ROOT = pathlib.Path(__file__).resolve().parent.parent.parent
TRAMLINED, TRAMLINE = sys.argv[1], sys.argv[2]

SITE = """\
site: {{name: "Test <site>", zone: Asia/Kolkata, nominal_v: 220, frequency_hz: 50}}
regulator: {{target_v: 220, band_v: [215, 225], input_v: [160, 270], speed_v_per_s: 20}}
channels: [{{side: input}}, {{side: output}}]
logbook: {{path: {logbook}}}
source:
  kind: simulator
  rate_hz: 3200
  real_time: {real_time}
  begin: 2026-03-01T00:00:00Z
  run_for: {run_for}
  grid: {{wander_pct: 0}}
  script:
    - {{at: 3s, what: sag, to_pct: 60, lasting: 300ms}}
    - {{at: 6s, what: servo_stuck}}
    - {{at: 8s, what: swell, to_pct: 117, lasting: 5s}}
"""


class Programs(unittest.TestCase):
    def setUp(self):
        self.folder = tempfile.TemporaryDirectory()
        self.path = pathlib.Path(self.folder.name)
        self.logbook = self.path / "site.logbook"

    def tearDown(self):
        self.folder.cleanup()

    def site(self, name="site.yaml", **change):
        values = {"logbook": self.logbook, "real_time": "false", "run_for": "20s", **change}
        file = self.path / name
        file.write_text(SITE.format(**values))
        return file

    def run_program(self, *arguments):
        return subprocess.run([str(a) for a in arguments], capture_output=True, text=True, timeout=120, check=False)

    def rows(self, sql):
        database = sqlite3.connect(self.logbook)
        try:
            return database.execute(sql).fetchall()
        finally:
            database.close()

    def start(self, site):
        daemon = subprocess.Popen([TRAMLINED, str(site)], stderr=subprocess.PIPE, text=True)
        self.addCleanup(daemon.stderr.close)
        self.addCleanup(daemon.kill)
        self.wait_for(daemon, "source: simulator")
        return daemon

    def wait_for(self, daemon, words):
        """Reads the log up to the line with these words."""
        for line in daemon.stderr:
            if words in line:
                return line
        self.fail(f"the daemon ended without saying: {words}")


class TheDaemon(Programs):
    def test_runs_a_simulation_to_its_end_and_leaves_a_whole_record(self):
        done = self.run_program(TRAMLINED, self.site())
        self.assertEqual(done.returncode, 0, done.stderr)
        self.assertEqual(self.rows("SELECT why_ended, measured_ns FROM coverage"), [("the simulated time is over", 20_000_000_000)])
        self.assertEqual(self.rows("SELECT why_ended FROM session"), [("the simulated time is over",)])
        self.assertEqual(self.rows("SELECT count(*) FROM event WHERE end_reason=0"), [(0,)])
        self.assertEqual(self.rows("PRAGMA integrity_check"), [("ok",)])

    def test_writes_the_same_events_as_the_import_of_the_same_source(self):
        self.run_program(TRAMLINED, self.site())
        events = "SELECT side, kind, begin_sample, begin_ns, end_ns, duration_ns, extreme_v, origin, reason FROM event ORDER BY begin_ns, side, kind"
        by_daemon = self.rows(events)
        self.assertGreaterEqual(len(by_daemon), 4)
        site = self.site()
        self.logbook = self.path / "imported.logbook"
        self.run_program(TRAMLINE, "import", "--site", site, "--into", self.logbook)
        self.assertEqual(self.rows(events), by_daemon)

    def test_stops_in_good_order_when_told_to(self):
        for number in (signal.SIGTERM, signal.SIGINT):
            with self.subTest(number):
                daemon = self.start(self.site(real_time="true", run_for="1h"))
                daemon.send_signal(number)
                self.assertEqual(daemon.wait(60), 0)
                ((why,),) = self.rows("SELECT why_ended FROM session ORDER BY id DESC LIMIT 1")
                self.assertIn("told to stop", why)
                self.assertEqual(self.rows("SELECT count(*) FROM session WHERE why_ended IS NULL"), [(0,)])

    def test_refuses_a_bad_site_file_on_hup_and_goes_on_with_the_old(self):
        site = self.site(real_time="true", run_for="1h")
        daemon = self.start(site)
        good = site.read_text()
        site.write_text(good.replace("nominal_v: 220", "nominal_v: -3"))
        daemon.send_signal(signal.SIGHUP)
        self.assertIn("nominal_v", self.wait_for(daemon, "site.yaml:"))
        self.wait_for(daemon, "the one in force stays")
        site.write_text(good.replace("Test <site>", "Renamed"))
        daemon.send_signal(signal.SIGHUP)
        self.wait_for(daemon, "the site file is read again")
        self.wait_for(daemon, "source: simulator")
        daemon.send_signal(signal.SIGTERM)
        self.assertEqual(daemon.wait(60), 0)
        self.assertEqual(self.rows("SELECT count(*) FROM session"), [(2,)])
        self.assertEqual(self.rows("SELECT count(*) FROM settings"), [(2,)])

    def test_closes_at_the_next_start_what_a_kill_left_open(self):
        daemon = self.start(self.site(real_time="true", run_for="1h"))
        daemon.kill()
        daemon.wait(60)
        again = self.run_program(TRAMLINED, self.site())
        self.assertEqual(again.returncode, 0, again.stderr)
        self.assertEqual(self.rows("SELECT count(*) FROM coverage WHERE why_ended IS NULL"), [(0,)])
        self.assertEqual(self.rows("PRAGMA integrity_check"), [("ok",)])

    def test_wrong_site_files_are_reported_whole_and_nothing_is_started(self):
        site = self.path / "bad.yaml"
        site.write_text("site: {name: X, nominal_v: 0}\nchanels: []\n")
        for arguments in ([site], ["--check", site]):
            done = self.run_program(TRAMLINED, *arguments)
            self.assertEqual(done.returncode, 2)
            self.assertIn("bad.yaml:1:", done.stderr)
            self.assertIn("bad.yaml:2:1", done.stderr)
            self.assertIn("channels", done.stderr)
        self.assertEqual([p.name for p in self.path.iterdir()], ["bad.yaml"])

    def test_a_logbook_that_cannot_be_had_ends_it_with_status_3(self):
        done = self.run_program(TRAMLINED, self.site(logbook=self.path / "no" / "such" / "folder" / "x"))
        self.assertEqual(done.returncode, 3)
        self.assertIn("check that the folder exists", done.stderr)

    def test_every_example_site_passes_its_own_check(self):
        for example in sorted((ROOT / "config" / "examples").glob("*.yaml")):
            done = self.run_program(TRAMLINED, "--check", example)
            self.assertEqual(done.returncode, 0, done.stderr)

    def test_under_journald_lines_begin_with_their_priority(self):
        done = subprocess.run([TRAMLINED, str(self.path / "none.yaml")], capture_output=True, text=True, timeout=60, check=False,
                              env={**os.environ, "JOURNAL_STREAM": "1:2"})
        self.assertRegex(done.stderr, r"^<3>")


PROBED = """\
site: {{name: Probed, nominal_v: 230, frequency_hz: 50}}
regulator: {{target_v: 230, band_pct: 3, input_v: [170, 270]}}
channels:
  - {{side: input, scale: {input_scale}}}
  - {{side: output, scale: {output_scale}}}
logbook: {{path: {logbook}}}
source: {{kind: simulator, rate_hz: 3200, grid: {{voltage_v: 195, wander_pct: 0}}, servo: {{load_step_a: 0}}}}
"""


class TheProbe(Programs):
    def probe(self, *options, **change):
        site = self.path / "probed.yaml"
        site.write_text(PROBED.format(**{"logbook": self.logbook, "input_scale": 1, "output_scale": 1, **change}))
        done = self.run_program(TRAMLINED, "--probe", *options, site)
        self.assertEqual([p.name for p in self.path.iterdir()], ["probed.yaml"], "a probe writes nothing")
        self.assertEqual(done.stderr, "")  # no progress in a pipe
        return done

    def found(self, **change):
        done = self.probe("--json", "--seconds", "2", **change)
        return done.returncode, [(f["severity"], f["matter"], f["channels"]) for f in json.loads(done.stdout)["findings"]]

    def test_a_sound_site_has_nothing_to_fix(self):
        done = self.probe()
        self.assertEqual(done.returncode, 0, done.stdout)
        self.assertTrue(done.stdout.startswith("Before anyone touches a wire"))
        self.assertIn("Mains voltage kills", done.stdout)
        self.assertTrue(done.stdout.rstrip().splitlines()[-1].startswith("Nothing must be fixed."))
        self.assertEqual(self.found(), (0, []))
        answer = json.loads(self.probe("--json", "--seconds", "3").stdout)
        self.assertEqual(answer["frames"], 9600)
        self.assertAlmostEqual(answer["channels"][0]["rms_v"], 195, delta=1)
        self.assertAlmostEqual(answer["channels"][0]["wave"]["thd_pct"], (1.5**2 + 2.5**2 + 1) ** 0.5, delta=0.05)

    def test_every_example_site_is_sound(self):
        for example in sorted((ROOT / "config" / "examples").glob("*.yaml")):
            done = self.run_program(TRAMLINED, "--probe", "--seconds", "1", example)
            self.assertEqual(done.returncode, 0, done.stdout + done.stderr)

    def test_a_scale_wrong_by_the_crest_factor_of_a_sine_is_found(self):
        self.assertEqual(self.found(output_scale=2**0.5), (1, [("must be fixed", "scale", ["output.L1"])]))
        told = self.probe(output_scale=2**0.5)
        self.assertEqual(told.returncode, 1)
        self.assertIn("to be 1 instead of 1.414", " ".join(told.stdout.split()))
        self.assertIn("1 thing must be fixed", told.stdout)

    def test_a_negative_scale_is_a_sensor_the_wrong_way_round(self):
        self.assertEqual(self.found(output_scale=-1), (1, [("must be fixed", "reversed", ["input.L1", "output.L1"])]))

    def test_channels_exchanged_in_a_recording_are_found(self):
        import math
        table = self.path / "two.csv"
        rows = [f"{n / 3200:.7f},{180 * 2**0.5 * math.sin(2 * math.pi * 50 * n / 3200):.2f},{230 * 2**0.5 * math.sin(2 * math.pi * 50 * n / 3200):.2f}" for n in range(6400)]
        table.write_text("time_s,a,b\n" + "\n".join(rows) + "\n")
        site = self.path / "exchanged.yaml"
        for first, second, expected in (("a", "b", (0, [])), ("b", "a", (1, [("must be fixed", "sides swapped")]))):
            site.write_text(f"""\
site: {{name: Probed, nominal_v: 230, frequency_hz: 50}}
regulator: {{target_v: 230, band_pct: 3, input_v: [170, 270]}}
channels: [{{side: input, source_channel: {first}}}, {{side: output, source_channel: {second}}}]
source: {{kind: recording, path: {table}, begin: 2026-03-01T00:00:00Z}}
""")
            done = self.run_program(TRAMLINED, "--probe", "--json", site)
            found = [(f["severity"], f["matter"]) for f in json.loads(done.stdout)["findings"]]
            self.assertEqual((done.returncode, found), expected, done.stderr)

    def test_wrong_site_files_and_sources_that_cannot_be_had_have_statuses_of_their_own(self):
        site = self.path / "bad.yaml"
        site.write_text("site: {name: X, nominal_v: 0}\n")
        self.assertEqual(self.run_program(TRAMLINED, "--probe", site).returncode, 2)
        site.write_text(PROBED.format(logbook="x", input_scale=1, output_scale=1).split("source:")[0] + "source: {kind: recording, path: none.wav}\n")
        done = self.run_program(TRAMLINED, "--probe", site)
        self.assertEqual(done.returncode, 3, done.stderr)
        self.assertIn("none.wav", done.stderr)
        self.assertEqual(done.stdout, "")

    def test_wrong_usage_ends_with_2(self):
        site = self.site()
        for options in (["--seconds", "3"], ["--json"], ["--probe", "--seconds", "0"], ["--probe", "--seconds", "61"], ["--probe", "--check"]):
            self.assertEqual(self.run_program(TRAMLINED, *options, site).returncode, 2, options)


CALIBRATED = """\
site: {{name: Plant, zone: UTC, nominal_v: 220, frequency_hz: 50}}
channels: [{{side: input, scale: {scale}}}, {{side: output}}]
regulator: {{target_v: 220, band_v: [215, 225], input_v: [160, 270], speed_v_per_s: 20}}
logbook: {{path: {logbook}}}
source:
  kind: simulator
  rate_hz: 3200
  real_time: false
  begin: {begin}
  run_for: 60s
  grid: {{wander_pct: 0, voltage_v: {voltage}}}
  script: [{{at: 50s, what: sag, to_pct: 60, lasting: 300ms}}]
"""

REFERENCE = ["--reference-uncertainty", "0.2%", "--reference", "bench meter, certificate 12"]


class Calibration(Programs):
    def plant(self, begin, voltage=220, scale=1.01):
        self.site_file = self.path / "plant.yaml"
        self.site_file.write_text(CALIBRATED.format(logbook=self.logbook, begin=begin, voltage=voltage, scale=scale))
        done = self.run_program(TRAMLINED, self.site_file)
        self.assertEqual(done.returncode, 0, done.stderr)
        return done

    def calibrate(self, *arguments, status=0):
        done = self.run_program(TRAMLINE, "calibrate", self.site_file, *arguments)
        self.assertEqual(done.returncode, status, done.stdout + done.stderr)
        return done

    def shown(self, begin):
        """The input's mean 3-s value of the minute from `begin`, of what is not flagged."""
        ((volts,),) = self.rows(f"SELECT avg(u_rms_v) FROM aggregate WHERE interval=0 AND side=0 AND flagged=0 AND NOT partial "
                                f"AND begin_ns/1000000000-strftime('%s','{begin}') BETWEEN 0 AND 59")
        return volts

    def test_a_scale_that_is_wrong_by_one_percent_is_calibrated_right(self):
        self.plant("2026-03-01T00:00:00Z")
        self.assertAlmostEqual(self.shown("2026-03-01 00:00:00"), 222.2, delta=0.15)
        at = [a for s in (10, 20, 30, 40) for a in ("--at", f"2026-03-01T00:00:{s}=220.0")]
        done = self.calibrate("--channel", "input L1", *at, *REFERENCE, "--valid-for", "365d")
        self.assertIn("Mains voltage kills", done.stdout)
        self.assertIn("+1.0", done.stdout)  # as found
        self.assertIn("reference, common to all readings", done.stdout)
        self.assertIn("HUP", done.stdout)
        self.plant("2026-03-02T00:00:00Z")
        self.assertAlmostEqual(self.shown("2026-03-02 00:00:00"), 220.0, delta=0.02)
        # Everything that follows from the samples is calibrated: the sag's residual voltage, the waveform.
        residuals = [v for (v,) in self.rows("SELECT extreme_v FROM event WHERE side=0 AND kind=0 ORDER BY begin_ns")]
        self.assertAlmostEqual(residuals[1] / residuals[0], 220.0 / self.shown("2026-03-01 00:00:00"), delta=0.002)
        self.assertEqual(self.rows("SELECT session FROM calibration"), [(2,)])

        # Once more, of a day with the calibration in force: it is undone and composed, so next to nothing changes.
        first = json.loads(self.calibrate("--show", "--json").stdout)["channels"][0]["gain"]
        again = json.loads(self.calibrate("--channel", "input", "--at", "2026-03-02T00:00:30=220.0", *REFERENCE, "--dry-run", "--json").stdout)
        self.assertAlmostEqual(again["calibration"]["gain"], first, delta=2e-4)
        # And of the day before it was made: whatever was in force then is taken out.
        old = json.loads(self.calibrate("--channel", "input", "--at", "2026-03-01T00:00:30=220.0", *REFERENCE, "--dry-run", "--json").stdout)
        self.assertAlmostEqual(old["calibration"]["gain"], first, delta=2e-4)
        self.assertFalse(old["written"])

        verdict = self.run_program(TRAMLINE, "verdict", "--from", "2026-03-02T00:00", self.logbook).stdout
        self.assertIn("input L1   calibrated 2026-03-01; 220 V is good for ±0.4", verdict)
        self.assertIn("output L1  no calibration", verdict)
        self.assertNotIn("changed within the period", verdict)
        self.assertIn("changed within the period (2026-03-02", self.run_program(TRAMLINE, "verdict", self.logbook).stdout)
        self.assertIn("No calibration: voltages rest", self.run_program(TRAMLINE, "verdict", "--to", "2026-03-01T12:00", self.logbook).stdout)
        self.assertIn("from 2026-03-02", self.calibrate("--show", "--logbook", self.logbook).stdout)

        # Taken away, it is told too.
        (self.path / "plant.calibration.yaml").unlink()
        self.plant("2026-03-03T00:00:00Z")
        self.assertEqual(self.rows("SELECT session, text='' FROM calibration"), [(2, 0), (3, 1)])
        self.assertAlmostEqual(self.shown("2026-03-03 00:00:00"), 222.2, delta=0.15)

    def test_readings_typed_in_compose_and_other_channels_keep_their_entries(self):
        self.plant("2026-03-01T00:00:00Z")
        self.calibrate("--channel", "input", "--reading", "222.2=220.0", "--reading", "202.0=200.0", "--dc-reading", "-0.3=0",
                       "--resolution", "0.1", *REFERENCE, "--note", "at the \"main\" board")
        kept = self.path / "plant.calibration.yaml"
        self.assertIn('note: "at the \\"main\\" board"', kept.read_text())
        # What the daemon measured last does not know the file yet: its display must not be taken for calibrated.
        refused = self.calibrate("--channel", "input", "--reading", "222.2=220.0", *REFERENCE, status=2)
        self.assertIn("read the site file again (HUP)", refused.stderr)
        # Another channel's display is what it was.
        self.calibrate("--channel", "output", "--reading", "220.0=221.0", *REFERENCE)
        text = kept.read_text()
        self.assertEqual(text.count("- side:"), 2)
        self.assertIn("certificate 12", text)
        self.plant("2026-03-02T00:00:00Z")
        self.assertAlmostEqual(self.shown("2026-03-02 00:00:00"), 220.0, delta=0.15)
        done = self.calibrate("--channel", "input", "--reading", "220.0=219.0", *REFERENCE)
        self.assertIn("Replaced", done.stdout)
        channels = json.loads(self.calibrate("--show", "--json").stdout)["channels"]
        self.assertAlmostEqual(channels[0]["gain"], 219.0 / 222.2, delta=1e-4)
        self.assertAlmostEqual(channels[0]["offset_v"], 0.3, delta=1e-4)  # only a d.c. reading changes it
        self.assertAlmostEqual(channels[1]["gain"], 221.0 / 220.0, delta=1e-6)

    def test_a_calibration_that_is_past_due_is_told_by_daemon_tool_and_verdict(self):
        self.plant("2026-03-01T00:00:00Z")
        self.calibrate("--channel", "output", "--at", "2026-03-01T00:00:30=220", *REFERENCE, "--due", "2026-03-02T00:00")
        done = self.plant("2026-03-03T00:00:00Z")
        self.assertIn("the calibration of output L1 of 2026-03-01 was due again on 2026-03-02", done.stderr)
        self.assertIn("PAST DUE since 2026-03-02", self.calibrate("--show", status=1).stdout)
        verdict = json.loads(self.run_program(TRAMLINE, "verdict", "--json", "--from", "2026-03-03T00:00", self.logbook).stdout)
        self.assertTrue(verdict["calibration"]["in_force"][0]["past_due"])

    def test_what_makes_no_calibration_is_refused_and_nothing_written(self):
        self.plant("2026-03-01T00:00:00Z")
        good = ["--channel", "input", "--reading", "222=220", *REFERENCE]
        for arguments, words in (
            ([], "Mains voltage kills"),
            (["--channel", "inputt", *good[2:]], "its channels are: input L1, output L1"),
            (["--channel", "input", "--reading", "110=220", *REFERENCE], "scale in the site file is probably wrong"),
            (["--channel", "input", "--reading", "222", *REFERENCE], "LOGGER=REFERENCE"),
            (["--channel", "input", "--reading", "222=220", "--reference", "x"], "uncertainty is not given"),
            ([*good[:4], "--reference-uncertainty", "30%", "--reference", "x"], "up to 20 %"),
            ([*good[:4], "--reference-uncertainty", "1V"], "the reference is not named"),
            ([*good, "--reference-date", "2150-01-01T00:00"], "in the future"),
            ([*good, "--due", "2020-01-01T00:00"], "not after the calibration"),
            ([*good, "--temperature-coefficient", "50"], "one is given without the other"),
            ([*good, "--reference-k", "0.2"], "coverage factor"),
            (["--channel", "input", "--at", "2026-03-01T00:00:50=220", *REFERENCE], "sag, swell or interruption"),
            (["--channel", "input", "--at", "2026-03-01T12:00:00=220", *REFERENCE], "no 3-s value"),
            (["--channel", "input", "--at", "yesterday=220", *REFERENCE], "--at"),
            (["--channel", "input", "--dc-reading", "1=0", *REFERENCE], "no a.c. reading"),
        ):
            with self.subTest(arguments):
                self.assertIn(words, self.calibrate(*arguments, status=2).stderr)
        self.assertFalse((self.path / "plant.calibration.yaml").exists())
        self.calibrate(*good, "--dry-run")
        self.assertFalse((self.path / "plant.calibration.yaml").exists())

    def test_a_voltage_that_moves_is_not_compared(self):
        self.plant("2026-03-01T00:00:00Z")
        text = self.site_file.read_text().replace("script: [", "script: [{at: 20s, what: level, to_v: 230, ramp: 20s, lasting: 5s}, ").replace("2026-03-01", "2026-03-05")
        self.site_file.write_text(text)
        self.run_program(TRAMLINED, self.site_file)
        done = self.calibrate("--channel", "input", "--at", "2026-03-05T00:00:30=225", *REFERENCE, status=2)
        self.assertIn("the voltage moved", done.stderr)

    def test_a_fault_of_the_calibration_file_keeps_the_daemon_from_starting(self):
        self.plant("2026-03-01T00:00:00Z")
        file = self.path / "plant.calibration.yaml"
        file.write_text("calibrations:\n  - side: input\n    gayn: 1\n")
        done = self.run_program(TRAMLINED, "--check", self.site_file)
        self.assertEqual(done.returncode, 2)
        self.assertIn("plant.calibration.yaml:3:5: calibrations[1].gayn is not a key here; did you mean gain?", done.stderr)


class NewSite(Programs):
    FLAGS = ["--name", "Fernhollow 12", "--zone", "Asia/Kolkata", "--nominal-v", "230", "--frequency-hz", "50", "--source", "simulator"]
    REGULATOR = ["--band-pct", "3", "--input-v", "170", "270"]

    def new_site(self, *arguments, name="new.yaml"):
        return subprocess.run([TRAMLINE, "new-site", str(self.path / name), *arguments], stdin=subprocess.DEVNULL, capture_output=True,
                              text=True, timeout=60, check=False)

    def test_flags_alone_make_a_site_that_passes_check_and_probe(self):
        done = self.new_site(*self.FLAGS, *self.REGULATOR)
        self.assertEqual(done.returncode, 0, done.stderr)
        self.assertIn("mains voltage kills", done.stdout)
        self.assertEqual(self.run_program(TRAMLINED, "--check", self.path / "new.yaml").returncode, 0)
        probed = self.run_program(TRAMLINED, "--probe", "--seconds", "1", self.path / "new.yaml")
        self.assertEqual(probed.returncode, 0, probed.stdout + probed.stderr)

    def test_where_nobody_can_be_asked_it_says_which_flags_are_missing(self):
        done = self.new_site("--name", "X", "--source", "tcp")
        self.assertEqual(done.returncode, 2)
        for flag in ("--nominal-v", "--frequency-hz", "--no-regulator", "--host", "--port"):
            self.assertIn(flag, done.stderr)
        self.assertNotIn("--name is", done.stderr)
        self.assertEqual(list(self.path.iterdir()), [])

    def test_what_the_site_file_would_not_allow_is_refused_and_not_written(self):
        for wrong in (["--zone", "Nowhere/Atall"], ["--input-v", "270", "170"]):
            done = self.new_site(*self.FLAGS, *self.REGULATOR[:2], *(wrong if wrong[0] == "--input-v" else [*self.REGULATOR[2:], *wrong]))
            self.assertEqual(done.returncode, 2, wrong)
            self.assertEqual(list(self.path.iterdir()), [])

    def test_a_file_that_is_there_stays_unless_forced(self):
        file = self.path / "new.yaml"
        file.write_text("mine")
        done = self.new_site(*self.FLAGS, "--no-regulator")
        self.assertEqual(done.returncode, 2)
        self.assertIn("--force", done.stderr)
        self.assertEqual(file.read_text(), "mine")
        self.assertEqual(self.new_site(*self.FLAGS, "--no-regulator", "--force").returncode, 0)
        self.assertIn("Fernhollow", file.read_text())
        self.assertEqual([p.name for p in self.path.iterdir()], ["new.yaml"])

    def test_a_folder_that_is_not_there_ends_it_with_3(self):
        done = self.new_site(*self.FLAGS, "--no-regulator", name="no/new.yaml")
        self.assertEqual(done.returncode, 3, done.stderr)

    def answered(self, *answers, arguments=()):
        """Runs it on a terminal of its own; each answer is given once its question stands there."""
        import pty
        import select
        ours, theirs = pty.openpty()
        process = subprocess.Popen([TRAMLINE, "new-site", str(self.path / "new.yaml"), *arguments], stdin=theirs, stdout=theirs, stderr=theirs)
        self.addCleanup(process.kill)
        os.close(theirs)
        shown = ""
        for question, answer in answers:
            while question not in shown:
                self.assertTrue(select.select([ours], [], [], 60)[0], f"never asked {question!r}, but: {shown}")
                shown += os.read(ours, 4096).decode()
            shown = shown[shown.index(question) + len(question):]
            os.write(ours, (answer + "\n").encode())
        try:
            while data := os.read(ours, 4096).decode():
                shown += data
        except OSError:  # the other end is closed
            pass
        os.close(ours)
        return process.wait(60), shown

    def test_questions_on_a_terminal_make_the_same_site(self):
        devices = self.path / "devices"
        (devices / "dev").mkdir(parents=True)
        (devices / "dev" / "ttyACM7").touch()
        status, shown = self.answered(
            ("Name of the site: ", "Fernhollow 12"), ("Time zone [", "Nowhere"), ("Time zone [", "Asia/Kolkata"),
            ("Which [1]: ", "1"), ("three-phase [y/N]: ", ""), ("Where sensors are", ""),
            ("regulator [Y/n]: ", ""), ("output voltage, phase to neutral [230]: ", ""), ("percent [3]: ", "2.5"),
            ("from its plate: ", "170"), ("from its plate: ", "170 270"), ("[not known]: ", "25"),
            ("found here: /dev/ttyACM7", ""), arguments=["--devices-under", str(devices), "--logbook", "x.logbook"])
        self.assertEqual(status, 0, shown)
        asked = (self.path / "new.yaml").read_text()
        (self.path / "new.yaml").unlink()
        self.new_site(*self.FLAGS, "--band-pct", "2.5", "--input-v", "170", "270", "--speed-v-per-s", "25", "--logbook", "x.logbook")
        self.assertEqual((self.path / "new.yaml").read_text(), asked)


class TheTool(Programs):
    def setUp(self):
        super().setUp()
        self.imported = self.run_program(TRAMLINE, "import", "--site", self.site())

    def test_the_verdict_blames_the_stuck_servo_and_ends_with_1(self):
        done = self.run_program(TRAMLINE, "verdict", self.logbook)
        self.assertEqual(done.returncode, 1, done.stderr)
        self.assertIn("did not hold its band of 215.0 to 225.0 V", done.stdout)
        self.assertIn("origin: regulator", done.stdout)
        self.assertIn("+05:30", done.stdout)
        answer = json.loads(self.run_program(TRAMLINE, "verdict", "--json", self.logbook).stdout)
        self.assertEqual(answer["answer"], "not held")
        self.assertEqual(answer["coverage"]["measured_s"], 20.0)
        self.assertNotIn("\x1b", done.stdout)

    def test_a_period_without_trouble_is_answered_with_0(self):
        done = self.run_program(TRAMLINE, "verdict", "--to", "2026-03-01T05:30:02.5", self.logbook)
        self.assertEqual(done.returncode, 0, done.stdout + done.stderr)
        self.assertIn("held its band", done.stdout)

    def test_events_are_listed_and_filtered(self):
        every = [json.loads(line) for line in self.run_program(TRAMLINE, "events", "--json", self.logbook).stdout.splitlines()]
        self.assertEqual({e["kind"] for e in every}, {"sag", "swell", "out of band"})
        sags = self.run_program(TRAMLINE, "events", "--json", "--kind", "sag", "--side", "input", self.logbook).stdout.splitlines()
        self.assertEqual(len(sags), 1)
        sag = json.loads(sags[0])
        self.assertAlmostEqual(sag["extreme_v"], 132.0, delta=0.5)
        self.assertAlmostEqual(sag["duration_s"], 0.31, delta=0.02)
        long = self.run_program(TRAMLINE, "events", "--json", "--longer-than", "1s", "--kind", "swell", self.logbook).stdout.splitlines()
        self.assertEqual(len(long), 2)

    def test_a_waveform_is_drawn_and_written_as_a_table(self):
        svg = self.run_program(TRAMLINE, "wave", self.logbook, "2").stdout
        self.assertTrue(svg.startswith("<svg"))
        self.assertIn("Test &lt;site&gt;", svg)
        self.assertNotIn("<site>", svg)
        out = self.path / "w.csv"
        self.assertEqual(self.run_program(TRAMLINE, "wave", "--csv", "-o", out, self.logbook, "2").returncode, 0)
        header, *rows = out.read_text().splitlines()
        self.assertEqual(header, "time_from_event_begin_s,input_L1_v,input_L1_half_cycle_rms_v,output_L1_v,output_L1_half_cycle_rms_v")
        self.assertGreater(len(rows), 1000)

    def test_wrong_questions_end_with_2_and_say_why(self):
        for arguments, words in (
            (["verdict", self.path / "none"], "no such logbook"),
            (["verdict", self.path / "site.yaml"], "not an SQLite file"),
            (["verdict", "--from", "yesterday", self.logbook], "--from"),
            (["verdict", "--from", "2026-03-02T00:00", "--to", "2026-03-01T00:00", self.logbook], "ends before it begins"),
            (["wave", self.logbook, "9999"], "no event with this number"),
            (["import", self.path / "none.wav", "--nominal-v", "230", "--into", self.path / "x"], "cannot be opened"),
            (["import", self.path / "site.yaml", "--into", self.path / "x"], "--nominal-v"),
            (["frobnicate"], ""),
        ):
            with self.subTest(arguments):
                done = self.run_program(TRAMLINE, *arguments)
                self.assertEqual(done.returncode, 2, done.stdout + done.stderr)
                self.assertIn(words, done.stderr + done.stdout)

    def test_an_undated_recording_is_marked_so(self):
        import math
        import struct
        import wave as wav
        path = self.path / "mains.wav"
        with wav.open(str(path), "wb") as out:
            out.setnchannels(1)
            out.setsampwidth(2)
            out.setframerate(6400)
            for n in range(32000):
                level = 0.5 if 12800 <= n < 16000 else 1.0
                out.writeframesraw(struct.pack("<h", round(level * 20000 * math.sin(2 * math.pi * 50 * n / 6400))))
        volts = 20000 / 32768 * 500 / math.sqrt(2)
        logbook = self.path / "wav.logbook"
        done = self.run_program(TRAMLINE, "import", path, "--nominal-v", volts, "--channel", "input.L1=1*500", "--into", logbook)
        self.assertEqual(done.returncode, 0, done.stderr)
        self.assertIn("undated", done.stdout)
        self.assertEqual(done.stderr, "")  # no progress bar in a pipe
        events = self.run_program(TRAMLINE, "events", logbook).stdout
        self.assertIn("1.99 s from the begin", events)
        dated = self.run_program(TRAMLINE, "import", path, "--nominal-v", volts, "--channel", "input.L1=1*500", "--start", "2026-03-01T06:00+05:30", "--into", self.path / "d")
        self.assertNotIn("undated", dated.stdout)


if __name__ == "__main__":
    unittest.main(argv=sys.argv[:1], verbosity=1)
