"""Hill charts: lines of equal efficiency become efficiency on every head curve."""

import numpy as np
import pytest

from curvefit.fit import fit
from curvefit.fit.hill import crossings, efficiency_between, efficiency_on_heads
from curvefit.records import Curve

DIAMETERS = np.linspace(0.17, 0.21, 5)


class Hill:
    """An invented pump whose efficiency loses with trim; not the law that the fit assumes."""

    def __init__(self, rng):
        self.flow_power, self.head_power = rng.uniform(1.0, 1.4), rng.uniform(1.9, 2.5)
        self.fall, self.power = rng.uniform(8, 14), rng.uniform(1.8, 2.6)
        self.loss, self.edge = rng.uniform(0.1, 0.4), rng.uniform(1.7, 2.0)
        self.bend, self.top = rng.uniform(2.2, 3.0), rng.uniform(0.65, 0.85)

    def head(self, flow, d):
        ratio = d / DIAMETERS[-1]
        x = flow / (0.04 * ratio**self.flow_power)
        return ratio**self.head_power * (30 - self.fall * x**self.power)

    def efficiency(self, flow, d):
        ratio = d / DIAMETERS[-1]
        x = flow / (0.04 * ratio**self.flow_power)
        rise = 1 - (1 - np.minimum(x / self.edge, 1)) ** 2.2
        return self.top * (1 - self.loss * (1 - ratio)) * rise * (1 - 0.2 * x**self.bend)

    def line(self, level):
        """Points (flow, head) of equal efficiency, over the diameters, a branch each."""
        branches = ([], [])
        for d in np.linspace(0.166, 0.214, 80):
            flow = np.linspace(0.004, 0.055 * (d / 0.21) ** self.flow_power, 500)
            eta = self.efficiency(flow, d)
            peak = int(np.argmax(eta))
            if eta[peak] <= level:
                continue
            rising = float(np.interp(level, eta[: peak + 1], flow[: peak + 1]))
            branches[0].append((rising, self.head(rising, d)))
            if eta[-1] < level:
                falling = float(np.interp(level, eta[peak:][::-1], flow[peak:][::-1]))
                branches[1].append((falling, self.head(falling, d)))
        return [np.array(b) for b in branches if len(b) > 8]


def curve(name, quantity, flow, head, rng, **more):
    u = np.full(len(flow), 0.004)
    value = np.asarray(head) + 0.7 * u * rng.standard_normal()
    return Curve(name, quantity, flow, value, "m3/h", "m", sigma_si=u, trace_sigma_si=u,
                 flow_axis="A.bottom", value_axis="A.left", **more)  # fmt: skip


def chart(rng):
    hill = Hill(rng)
    curves = []
    for d in DIAMETERS:
        flow = np.linspace(0.001, 0.05 * (d / 0.21) ** hill.flow_power, 300)
        curves.append(curve(f"head {d * 1e3:.0f}", "head", flow, hill.head(flow, d), rng,
                            diameter_si=float(d), label=f"Ø{d * 1e3:.0f}"))  # fmt: skip
    top = np.floor(100 * hill.efficiency(np.linspace(0.01, 0.05, 300), 0.21).max())
    for level in (top - np.array([1, 3, 6, 10, 16])) / 100:
        for k, b in enumerate(hill.line(level)):
            curves.append(curve(f"{level:.0%} {k}", "iso_efficiency", b[:, 0], b[:, 1], rng,
                                level_si=float(level)))  # fmt: skip
    return hill, curves


def test_crossings_are_where_the_lines_meet():
    hill, curves = chart(np.random.default_rng(1))
    for head in curves[:5]:
        met = crossings(head, curves[5:])
        assert len(met) >= 3
        for flow, level, u in met:
            true = hill.efficiency(flow, head.diameter_si)
            slope = abs(
                hill.efficiency(flow * 1.001, head.diameter_si)
                - hill.efficiency(flow * 0.999, head.diameter_si)
            ) / (0.002 * flow)
            assert abs(true - level) < max(5 * slope * u, 0.002)


@pytest.mark.parametrize("seed", [0])
def test_efficiencies_from_lines_hold_the_truth(seed):
    rng = np.random.default_rng(seed)
    held, rms, count = [], [], 0
    for _ in range(8):
        hill, curves = chart(rng)
        fits = efficiency_on_heads(curves)
        count += len(fits)
        for one in fits:
            known = one.curve.flow_si
            at = (one.band.flow_si >= known[0]) & (one.band.flow_si <= known[-1])
            true = hill.efficiency(one.band.flow_si[at], one.curve.diameter_si)
            rms.append(np.sqrt(np.mean((one.band.value_si[at] - true) ** 2)))
            held.append(np.mean((one.band.low_si[at] <= true) & (true <= one.band.high_si[at])))
    assert count >= 32
    assert np.median(rms) < 0.002
    assert np.max(rms) < 0.01
    assert np.mean(held) > 0.88


def test_a_hill_chart_gives_what_a_chart_with_efficiency_curves_gives():
    hill, curves = chart(np.random.default_rng(5))
    fits = fit(curves)
    made = [f for f in fits if f.curve.quantity == "efficiency"]
    assert {f.curve.diameter_si for f in made} == {float(d) for d in DIAMETERS}
    largest = next(f for f in fits if f.curve is curves[4])
    flow = np.linspace(0.02, 0.05, 4000)
    best = flow[np.argmax(hill.efficiency(flow, 0.21))]
    assert largest.derived["bep"]["flow_si"] == pytest.approx(best, rel=0.03)
    assert [x.code for f in made for x in f.findings] == ["fit.efficiency-from-lines"]


def test_too_few_lines_give_no_efficiency():
    _, curves = chart(np.random.default_rng(6))
    assert efficiency_on_heads(curves[:5]) == ()
    assert efficiency_on_heads(curves[:1] + curves[5:]) == ()


def test_an_efficiency_between_the_drawn_diameters():
    hill, curves = chart(np.random.default_rng(7))
    one = efficiency_between(curves, 0.195)
    true = hill.efficiency(one.band.flow_si, 0.195)
    assert np.sqrt(np.mean((one.band.value_si - true) ** 2)) < 0.003
    assert np.mean((one.band.low_si <= true) & (true <= one.band.high_si)) > 0.9
    assert one.findings == ()
    assert {f.code for f in efficiency_between(curves, 0.15).findings} == {"family.beyond-drawn"}
    assert len(efficiency_between(curves, 0.17).curves) == 1
    assert efficiency_between(curves[:5], 0.195) is None
