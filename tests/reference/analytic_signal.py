"""Mains voltages written as formulas, and what IEC 61000-4-30 says of them, computed from the formulas.

Nothing here looks at samples: r.m.s. values come from the closed integral of the squared voltage, half-cycle windows
from the known phase of the fundamental, events from the definition. So a mistake that the measurement core and a
sampled computation might share shows up.
"""
import numpy as np

TURN = 2.0 * np.pi


class Wave:
    """One channel: level(t) * sqrt(2) * volts * [sin(phi) + sum of share * sin(order * phi + angle)] + d.c.

    `level` is 1 and changes in steps; phi is 0 degrees at an upward zero crossing. An order need not be whole:
    interharmonics are written in the same way.
    """

    def __init__(self, hz, volts, degrees=0.0, harmonics=(), dc_v=0.0, steps=()):
        self.hz = hz
        self.phase_0 = np.radians(degrees)
        self.dc_v = dc_v
        peak = np.sqrt(2.0) * volts
        self.terms = [(peak, 1.0, 0.0)] + [(peak * share, order, np.radians(angle)) for order, share, angle in harmonics]
        self.step_times = np.array([0.0] + [at for at, _ in steps])
        self.levels = np.array([1.0] + [level for _, level in steps])
        squares = self._square_integral(self.step_times) if len(steps) else np.zeros(1)
        self.before_step = np.concatenate(([0.0], np.cumsum(self.levels[:-1] ** 2 * np.diff(squares))))

    def volts_at(self, t):
        """The voltage at the times `t`."""
        phase = TURN * self.hz * t + self.phase_0
        volts = sum(a * np.sin(order * phase + angle) for a, order, angle in self.terms)
        if self.dc_v:
            volts = volts + self.dc_v
        if len(self.levels) > 1:
            volts = volts * self.levels[np.searchsorted(self.step_times, t, side="right") - 1]
        return volts

    def samples(self, seconds, rate_hz):
        """float64 volts, as a sensor without error takes them."""
        return self.volts_at(np.arange(round(seconds * rate_hz)) / rate_hz)

    def time_of_phase(self, degrees):
        """When the phase of the fundamental is this, counted on from its value at t = 0."""
        return (np.radians(degrees) - self.phase_0) / (TURN * self.hz)

    def _square_integral(self, t):
        """Integral of the squared voltage at level 1, from some fixed time to `t`: the closed form."""
        sines = [(a, TURN * self.hz * order, order * self.phase_0 + angle) for a, order, angle in self.terms]
        if self.dc_v:
            sines.append((self.dc_v, 0.0, np.pi / 2.0))
        total = np.zeros_like(t)
        for i, (a, w, angle) in enumerate(sines):
            for b, v, other in sines[i:]:
                twice = 1.0 if (b, v, other) == (a, w, angle) else 2.0
                half = twice * a * b / 2.0
                total += half * (_integral_of_cos(w - v, angle - other, t) - _integral_of_cos(w + v, angle + other, t))
        return total

    def energy(self, t):
        """Integral of the squared voltage from 0 to `t`, steps of the level included."""
        segment = np.searchsorted(self.step_times, t, side="right") - 1
        since = self._square_integral(t) - self._square_integral(self.step_times)[segment]
        return self.before_step[segment] + self.levels[segment] ** 2 * since

    def rms(self, begin, end):
        """R.m.s. over [begin, end)."""
        return np.sqrt(np.maximum(0.0, (self.energy(end) - self.energy(begin)) / (end - begin)))

    def crossings(self, seconds):
        """Times of all zero crossings of the fundamental in [0, seconds], upward or downward."""
        first = np.ceil(self.phase_0 / np.pi - 1e-9)
        times = (np.arange(first, first + 2.0 * self.hz * seconds + 2.0) * np.pi - self.phase_0) / (TURN * self.hz)
        return times[(times >= 0.0) & (times <= seconds)]

    def half_cycle_values(self, seconds):
        """(begin, r.m.s.) of each one-cycle window that begins at a zero crossing and lies within the recording."""
        begin = self.crossings(seconds)
        begin = begin[begin + 1.0 / self.hz <= seconds + 1e-12]
        return begin, self.rms(begin, begin + 1.0 / self.hz)


def _integral_of_cos(w, angle, t):
    """Antiderivative of cos(w t + angle)."""
    if abs(w) < 1e-9:
        return np.cos(angle) * t
    return np.sin(w * t + angle) / w


class Limits:
    """Sag, swell and interruption thresholds in percent of the nominal voltage, with their hysteresis."""

    def __init__(self, sag=90.0, swell=110.0, interruption=5.0, hysteresis=2.0):
        self.sag, self.swell, self.interruption, self.hysteresis = sag, swell, interruption, hysteresis

    def moved(self, by_pct):
        """All thresholds a little further in (positive) or out: an event that both see alike is not in doubt."""
        return Limits(self.sag + by_pct, self.swell - by_pct, self.interruption + by_pct, self.hysteresis)


def events_by_definition(values_of_channels, nominal_v, limits=None):
    """Events of one side by IEC 61000-4-30:2015, 5.4 and 5.5, any number of phases, sorted by begin.

    `values_of_channels`: a (begin, r.m.s.) pair of arrays a phase. Gives (kind, begin, end, extreme, phases); the times are
    those at which the first window past the threshold and the first window back begin; end is None while it goes on.
    """
    limits = limits or Limits()
    count = len(values_of_channels)
    begins = np.concatenate([b for b, _ in values_of_channels])
    values = np.concatenate([v for _, v in values_of_channels]) / nominal_v * 100.0
    phase_of = np.repeat(np.arange(count), [len(b) for b, _ in values_of_channels])
    order = np.argsort(begins, kind="stable")
    found = []
    for kind, past, back in (
            ("sag", values < limits.sag, values >= limits.sag + limits.hysteresis),
            ("swell", values > limits.swell, values <= limits.swell - limits.hysteresis),
            ("interruption", values < limits.interruption, values >= limits.interruption + limits.hysteresis)):
        if not past.any():
            continue
        worst = np.fmax if kind == "swell" else np.fmin
        is_past, is_back, latest = np.zeros(count, bool), np.ones(count, bool), np.full(count, np.nan)
        event = None
        for i in order:
            phase = phase_of[i]
            is_past[phase], is_back[phase], latest[phase] = past[i], back[i], values[i]
            if event is None:
                if is_past.all() if kind == "interruption" else is_past.any():
                    event = [kind, begins[i], None, worst.reduce(latest[is_past]), set(np.flatnonzero(is_past))]
            elif is_back.any() if kind == "interruption" else is_back.all():
                event[2] = begins[i]
                found.append(event)
                event = None
            else:
                event[3] = worst(event[3], values[i])
                if past[i]:
                    event[4].add(phase)
        if event is not None:
            found.append(event)
    found.sort(key=lambda e: (e[1], e[0]))
    return [(kind, begin, end, extreme / 100.0 * nominal_v, sorted(int(p) for p in phases))
            for kind, begin, end, extreme, phases in found]
