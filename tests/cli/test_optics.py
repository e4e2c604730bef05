"""The optics command: its numbers against published formulas and figures."""
import json

import pytest

from conftest import Run

BENCH = ["--wavelength-nm", "488", "--substrate-n", "1.518", "--medium-n", "1.33"]


def numbers(*arguments):
    run = Run(["optics", *arguments, "--json"])
    assert run.status == 0, run.err
    return json.loads(run.out)


def test_depth_and_critical_angles():
    # closed forms: depth = wavelength / (4 pi sqrt(n1^2 sin^2 - n2^2)), asin(n2 / n1); evaluated with 40 digits
    o = numbers(*BENCH, "--cell-n", "1.37", "--angle-deg", "70")
    assert o["depth_nm"] == pytest.approx(75.314026, rel=1e-6)
    assert o["depth_with_cell_n_nm"] == pytest.approx(97.737476, rel=1e-6)
    assert o["critical_angle_medium_deg"] == pytest.approx(61.181708, abs=1e-6)
    assert o["critical_angle_cell_deg"] == pytest.approx(64.489090, abs=1e-6)
    assert o["interface_s"] == pytest.approx(2.013766304, rel=1e-8)
    assert o["interface_p"] == pytest.approx(2.534647433, rel=1e-8)


def test_exponential_decay_column():
    # closed form exp(-gap / depth)
    o = numbers(*BENCH, "--angle-deg", "70")
    decay = {row["gap_nm"]: row["exponential"] for row in o["decay"]}
    assert decay[50] == pytest.approx(0.514846, abs=1e-6)
    assert decay[100] == pytest.approx(0.265067, abs=1e-6)


def test_depth_round_trip():
    o = numbers(*BENCH, "--depth-nm", "75.314026")
    assert o["angle_deg"] == pytest.approx(70, abs=1e-5)


def test_angle_quoted_in_another_index():
    # n sin(angle) is conserved (Snell): 1.518 sin 70 = 1.4264535; in water of 1.4 it would be a larger angle
    o = numbers(*BENCH, "--angle-deg", "70", "--angle-n", "1.4265")
    assert o["na_effective"] == pytest.approx(1.4265 * 0.9396926208, rel=1e-9)


def test_below_the_critical_angle_is_refused_with_the_mend():
    # 445 nm, 1.52 / 1.33 at 61 deg lies below the critical angle, 61.044976 deg
    run = Run(["optics", "--wavelength-nm", "445", "--substrate-n", "1.52", "--medium-n", "1.33", "--angle-deg", "61"])
    assert run.status == 2
    assert "61.04 deg" in run.err and "1.3300" in run.err


def test_barely_and_not_at_all_evanescent_in_the_cell():
    barely = Run(["optics", *BENCH, "--angle-deg", "65"]).out
    assert "Barely" in barely
    through = Run(["optics", *BENCH, "--angle-deg", "63"]).out
    assert "runs into the cell" in through
    assert "Totally reflected against the medium and against the cell" in Run(["optics", *BENCH, "--angle-deg", "70"]).out


def test_laser_caution_stands_where_an_angle_is_shown():
    assert "laser safety officer" in Run(["optics", *BENCH, "--angle-deg", "70"]).out
