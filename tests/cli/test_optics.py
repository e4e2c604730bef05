"""The optics command: its numbers against published formulas and figures."""
import json
import os
import stat

import pytest
from PIL import Image

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


def test_verdicts_in_words():
    assert "BARELY" in Run(["optics", *BENCH, "--angle-deg", "65"]).out
    through = Run(["optics", *BENCH, "--angle-deg", "63"]).out
    assert "NOT FOR CELLS" in through and "runs\non into the cell" in through
    assert "GOOD" in Run(["optics", *BENCH, "--angle-deg", "70"]).out


def test_angle_for_a_wanted_depth():
    # closed form: n sin(angle) = sqrt(n2^2 + (wavelength / (4 pi depth))^2)
    o = numbers(*BENCH, "--for-depth-nm", "75.314026")
    assert o["for_depth"]["angle_low_deg"] == pytest.approx(70, abs=1e-5)
    assert o["depth_nm"] == pytest.approx(75.314026, rel=1e-6)  # without an angle the report is of the wished one
    both = numbers(*BENCH, "--angle-deg", "68", "--for-depth-nm", "75.314026")
    assert both["angle_deg"] == pytest.approx(68, abs=1e-6)


def test_a_depth_the_objective_cannot_reach_is_refused_with_its_thinnest():
    # 561 nm, NA 1.49, n2 1.33: 66.461242 nm, closed form
    run = Run(["optics", "--wavelength-nm", "561", "--substrate-n", "1.515", "--medium-n", "1.33", "--objective-na", "1.49",
               "--for-depth-nm", "60"])
    assert run.status == 2
    assert "objective" in run.err and "66.5 nm" in run.err


def test_angles_for_a_wanted_agreement_do_agree():
    bench = ["--wavelength-nm", "488", "--substrate-n", "1.518", "--medium-n", "1.337", "--polarization", "s"]
    o = numbers(*bench, "--for-agreement-nm", "2")
    wish = o["for_agreement"]
    for na in (wish["na_effective_low"], wish["na_effective_high"]):
        there = numbers(*bench, "--na-effective", f"{na:.6f}")
        for reads, truth in (("exponential_reads_layered_50_nm", 50), ("exponential_reads_layered_100_nm", 100)):
            assert abs(there[reads] - truth) <= 2.01
    beyond = numbers(*bench, "--na-effective", f"{wish['na_effective_high'] + 0.003:.6f}")
    assert abs(beyond["exponential_reads_layered_100_nm"] - 100) > 1.9


def test_indices_by_name():
    # cover glass at 488 nm 1.529828 in air (catalogue formula), water of 37 deg C 1.335386 (IAPWS R9-97)
    o = numbers("--wavelength-nm", "488", "--substrate", "coverglass", "--medium", "water", "--angle-deg", "70")
    assert o["substrate_n"] == pytest.approx(1.529828 * 1.000273, abs=3e-6)
    assert o["medium_n"] == pytest.approx(1.335386, abs=3e-6)


def test_coating_value():
    # 10 nm of 1.40 between glass and water, s polarized: 1.896393 on top of it (thin-film matrix)
    o = numbers("--wavelength-nm", "488", "--substrate-n", "1.518", "--medium-n", "1.335", "--angle-deg", "70",
                "--coating-n", "1.40", "--coating-nm", "10")
    assert o["interface_s"] == pytest.approx(1.896393, abs=1e-6)


def test_what_one_sd_does():
    # closed form at 488 nm, 1.518 / 1.37: n2 + 0.01 turns 97.737476 into 107.552943; theta + 0.5 deg into 94.003501
    run = numbers("--wavelength-nm", "488", "--substrate-n", "1.518", "--medium-n", "1.37", "--cell-n", "1.38",
                  "--angle-deg", "70", "--angle-sd-deg", "0.5")
    changes = {c["input"]: c for c in run["changes"]}
    assert changes["angle"]["depth_change_nm"] == pytest.approx(94.003501 - 97.737476, abs=1e-5)
    assert changes["angle"]["step_is_sd"] and not changes["medium_n"]["step_is_sd"]
    # a gap of 50 nm read with the nominal depth: 50 * 97.737476 / 94.003501
    assert changes["angle"]["gap_at_cutoff_change_nm"] == pytest.approx(50 * 97.737476 / 94.003501 - 50, abs=0.01)
    assert changes["cell_n"]["depth_change_nm"] == 0


def test_decay_table_from_a_file(tmp_path):
    table = tmp_path / "decay.csv"
    table.write_text("gap_nm,relative\r\n0,2.0\r\n100,1.0\r\n200,0.5\r\n")
    bench = tmp_path / "bench.ini"
    bench.write_text("[light]\nwavelength_nm = 488\n[interface]\nsubstrate_n = 1.518\nmedium_n = 1.337\nangle_deg = 70\n"
                     "[decay]\nmodel = table\nfile = decay.csv\n")
    decay = {row["gap_nm"]: row["in_force"] for row in numbers("-i", str(bench))["decay"]}
    assert decay[100] == pytest.approx(0.5) and decay[50] == pytest.approx(0.5**0.5)
    for text, where, word in [("gap_nm,relative\n0,1\n10,1.2\n", "decay.csv:3", "must fall"),
                              ("gap_nm,relative\n5,1\n10,0.9\n", "decay.csv:2", "begin at 0"),
                              ("gap_nm,relative\n0,1\n\n10,x\n", "decay.csv:4", "not a number"),
                              ("gap_nm,relative\n0,1\n20,0.5\n10,0.4\n", "decay.csv:4", "must rise"),
                              ("gap_nm;relative\n0;1\n", "decay.csv:1", "semicolons"),
                              ("gap_nm,relative\n0,1\n10\n", "decay.csv:3", "1 fields"),
                              ("z,relative\n0,1\n10,0.5\n", "decay.csv:1", "gap_nm,relative"),
                              ("gap_nm,relative\n0,1\n", "decay.csv:1", "1 row below"),
                              ("", "decay.csv:1", "header"),
                              ('gap_nm,relative\n0,"1\n', "decay.csv:2", "never closed")]:
        table.write_text(text)
        run = Run(["optics", "-i", str(bench)])
        assert run.status == 2 and where in run.err and word in run.err, run.err


def test_series_stands_for_its_smallest_angle(tmp_path):
    bench = tmp_path / "bench.ini"
    bench.write_text("[light]\nwavelength_nm = 488\n[interface]\nsubstrate_n = 1.518\nmedium_n = 1.33\n"
                     "[series]\nangles_deg = 74, 70, 72\n")
    assert numbers("-i", str(bench))["depth_nm"] == pytest.approx(75.314026, rel=1e-6)
    assert "3 angles" in Run(["optics", "-i", str(bench)]).out


def test_plot_is_a_picture_and_faults_are_told(tmp_path):
    png = tmp_path / "depth.png"
    run = Run(["optics", *BENCH, "--angle-deg", "70", "--objective-na", "1.49", "--plot", str(png)])
    assert run.status == 0
    image = Image.open(png)
    assert image.size == (1160, 560) and len(image.getcolors()) > 20
    again = tmp_path / "again.png"
    Run(["optics", *BENCH, "--angle-deg", "70", "--objective-na", "1.49", "--plot", str(again)])
    assert again.read_bytes() == png.read_bytes()
    refused = Run(["optics", *BENCH, "--angle-deg", "70", "--plot", str(tmp_path) + "/"])
    assert refused.status == 2 and "ends in .png" in refused.err
    assert Run(["optics", *BENCH, "--angle-deg", "70", "--plot", "/proc/nowhere/x.png"]).status == 3
    assert Run(["optics", *BENCH, "--angle-deg", "70", "--plot", ".."]).status == 2


def test_plot_replaces_no_pipe(tmp_path):
    pipe = tmp_path / "pipe.png"
    os.mkfifo(pipe)
    run = Run(["optics", *BENCH, "--angle-deg", "70", "--plot", str(pipe)])
    assert run.status == 3 and "in the way" in run.err
    assert stat.S_ISFIFO(os.stat(pipe).st_mode)
    assert os.listdir(tmp_path) == ["pipe.png"]


def test_laser_caution_stands_where_an_angle_is_shown():
    assert "laser safety officer" in Run(["optics", *BENCH, "--angle-deg", "70"]).out


def test_angles_beyond_the_surface_are_refused():
    for angle in (["--angle-deg", "90"], ["--na-effective", "1.518"]):
        run = Run(["optics", *BENCH, *angle])
        assert run.status == 2 and "no light enters" in run.err and "nan" not in run.out + run.err


def test_wishes_no_set_up_can_grant_say_why():
    for wish in (["--for-depth-nm", "80"], ["--for-agreement-nm", "2"]):
        run = Run(["optics", *BENCH, "--objective-na", "1.3", *wish])
        assert run.status == 2 and "1.3000" in run.err and "nan" not in run.err, run.err
    for wrong in ("1e-300", "inf", "nan", "0"):
        assert Run(["optics", *BENCH, "--for-depth-nm", wrong]).status == 2


@pytest.mark.parametrize("rows, where, word", [
    ("0,1e300\n50,1e299\n1e300,1e-300\n", "decay.csv:4", "expected 0 to"),
    ("0,1\n1e-300,0.5\n2e-300,0.1\n", "decay.csv:3", "by at least"),
    ("0,1\n1,0.1\n", "decay.csv:3", "no evanescent field"),
    ("0,1\n100,0.999\n", "decay.csv:3", "tells no gap")])
def test_decays_that_no_field_has_are_refused(tmp_path, rows, where, word):
    (tmp_path / "decay.csv").write_text("gap_nm,relative\n" + rows)
    bench = tmp_path / "bench.ini"
    bench.write_text("[decay]\nmodel = table\nfile = decay.csv\n")
    run = Run(["optics", *BENCH, "--angle-deg", "70", "-i", str(bench)])
    assert run.status == 2 and where in run.err and word in run.err, run.err


def test_a_decay_file_without_its_model_is_refused(tmp_path):
    (tmp_path / "decay.csv").write_text("gap_nm,relative\n0,1\n100,0.3\n")
    (tmp_path / "bench.ini").write_text("[decay]\nfile = decay.csv\n")
    run = Run(["optics", *BENCH, "--angle-deg", "70", "-i", str(tmp_path / "bench.ini")])
    assert run.status == 2 and "needs model = table" in run.err
