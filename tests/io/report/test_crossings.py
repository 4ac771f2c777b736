"""What else the locus offers on the chosen pole's lines: all of it, with its gain."""

import numpy as np
import pytest
from gainwright.design.locus.condition import point_on_locus
from gainwright.design.locus.loop import OpenLoop
from gainwright.design.locus.offered import offered
from gainwright.io.report.crossings import crossings

THREE_ON_A_RAY = OpenLoop((1.0, 1.5), (1.0, 11.0, 10.0, 0.0))


def test_all_three_crossings_of_a_damping_ray_are_offered_and_the_chosen_one_marked():
    """RL-19 (Nise, Ex. 8.8): exact K 7.33624, 12.82042, 39.62165 on the ray of 0.8; the second one was chosen."""
    chosen = point_on_locus(THREE_ON_A_RAY, 12.82042, -1.196 + 0.897j)
    table = crossings(THREE_ON_A_RAY, chosen, "V/mm")
    assert table is not None
    ray = [row for row in table.rows if row[0] == "damping ratio 0.8"]
    assert [row[2] for row in ray] == ["7.33624 V/mm", "12.8204 V/mm", "39.6216 V/mm"]
    assert [row[3] for row in ray] == ["", "chosen", ""]
    assert table.rows[table.emphasis[0]][2] == "12.8204 V/mm"


@pytest.mark.parametrize(
    ("loop", "gain"), [(THREE_ON_A_RAY, 20.0), (OpenLoop((3.0, 6.0), (1.0, 5.0, 9.0, 5.0, 0.0), 0.2, 0.05), 1.0)]
)
def test_every_point_offered_is_a_closed_loop_pole_on_its_line(loop, gain):
    """1 + K G_L = 0 there from the polynomials, dead time and hold written out."""
    chosen = point_on_locus(loop, gain, -0.6 + 1.3j)
    lines = offered(loop, chosen)
    assert sum(len(line.points) for line in lines) >= 3
    for line in lines:
        for each in line.points:
            s = each.point
            value = np.polyval(loop.numerator, s) / np.polyval(loop.denominator, s) * np.exp(-s * loop.dead_time)
            if loop.hold:
                value *= (1.0 - np.exp(-s * loop.hold)) / (s * loop.hold)
            assert abs(1.0 + each.loop_gain * value) < 1e-9
            on = {"damping ratio": -s.real / abs(s), "natural frequency": abs(s), "settling line": s.real}[line.kind]
            assert on == pytest.approx(line.at, rel=1e-9)


def test_a_real_pole_has_a_circle_and_a_line_and_no_ray():
    """On the real axis the damping ratio is one: its ray is the axis itself."""
    chosen = point_on_locus(THREE_ON_A_RAY, 1.0, -0.2)
    assert chosen.imag == pytest.approx(0.0, abs=1e-9)
    assert [line.kind for line in offered(THREE_ON_A_RAY, complex(chosen.real))] == [
        "natural frequency",
        "settling line",
    ]
