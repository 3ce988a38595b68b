"""Loop areas against an independent polygon library and by hand.

Outside authority: shapely (BSD-3-Clause), whose signed areas come from GEOS; the box and the ellipse are elementary geometry
(ellipse pi a b). Stroke work is the area of the loop: Suga and Sagawa 1974, Circ Res 35:117 (from memory).
"""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from shapely.geometry import LinearRing, Polygon

from metrics.signals.landmarks import loop_areas
from tests.metrics.recorded_hearts import heart_runs, signals_and_beats


def area(volume_ml, pressure_mmhg):
    """The program's area of one loop, mmHg mL."""
    last = np.array([len(volume_ml) - 1])
    return float(loop_areas(np.asarray(pressure_mmhg), np.asarray(volume_ml), np.array([0]), last)[0])


@given(st.integers(3, 60), st.integers(0, 2**32 - 1))
def test_simple_loops_have_the_area_of_their_polygon(count, seed):
    # a star-shaped loop about its middle never crosses itself
    rng = np.random.default_rng(seed)
    turn, reach = np.sort(rng.uniform(0.0, 2.0 * np.pi, count)), rng.uniform(0.3, 1.0, count)
    volume, pressure = 100.0 + 40.0 * reach * np.cos(turn), 70.0 + 60.0 * reach * np.sin(turn)
    ring = LinearRing(np.column_stack([volume, pressure]))
    signed = Polygon(ring).area if ring.is_ccw else -Polygon(ring).area
    if ring.is_simple:
        assert area(volume, pressure) == pytest.approx(signed, rel=1e-9, abs=1e-9)
        assert area(volume[::-1], pressure[::-1]) == pytest.approx(-signed, rel=1e-9, abs=1e-9)


@pytest.mark.parametrize("run", ["rest", "ramp"])
@pytest.mark.parametrize("heart", ["normal", "right"])
def test_simulated_loops_have_the_area_of_their_polygon(heart, run):
    signals, beats = signals_and_beats(heart_runs(heart)[run])
    for start, end, work in zip(beats.start, beats.end, beats.sw_mmhg_ml, strict=True):
        corners = np.column_stack([signals.volume_ml[start : end + 1], signals.pressure_mmhg[start : end + 1]])
        # a loop that crosses itself is split by the library: lobes run either way, their signed areas add up
        lobes = Polygon(corners).buffer(0.0).area
        assert work == pytest.approx(lobes, rel=0.005)
        assert work > 0.0


def test_a_figure_of_eight_counts_each_lobe_in_its_own_direction():
    volume, pressure = np.array([0.0, 4.0, 4.0, 0.0, -2.0, -2.0]), np.array([0.0, 0.0, 3.0, 0.0, 0.0, -1.0])
    right, left = Polygon([(0, 0), (4, 0), (4, 3)]), Polygon([(0, 0), (-2, 0), (-2, -1)])
    assert area(volume, pressure) == pytest.approx(right.area + left.area)
    assert area(np.array([0.0, 4.0, 4.0, -2.0, -2.0]), np.array([0.0, 0.0, 3.0, -1.5, 0.0])) == pytest.approx(right.area - 1.5)


def test_the_box():
    # by hand: 66.6667 mL times 133.3333 mmHg
    box = ([130.0, 130.0, 190.0 / 3.0, 190.0 / 3.0], [0.0, 400.0 / 3.0, 400.0 / 3.0, 0.0])
    assert area(*box) == pytest.approx(8888.888889)
    assert area(*box) * 1.33322387415e-4 == pytest.approx(1.185088, abs=1e-6)  # joule


def test_the_ellipse():
    # by hand: pi times 30 mL times 50 mmHg; a polygon of n corners has n / (2 pi) sin(2 pi / n) of it
    for count in (8, 90, 720, 7200):
        turn = 2.0 * np.pi * np.arange(count) / count
        share = count / (2.0 * np.pi) * np.sin(2.0 * np.pi / count)
        assert area(100.0 + 30.0 * np.cos(turn), 60.0 + 50.0 * np.sin(turn)) == pytest.approx(1500.0 * np.pi * share, rel=1e-12)
