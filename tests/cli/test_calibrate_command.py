# SPDX-License-Identifier: GPL-3.0-or-later
"""`underfoot calibrate`: every kind on the demo's bench, whose truth truth.txt tells, and every way it can go wrong."""
import csv
import json
import os
import re
import shutil

import numpy
import pytest
import tifffile
from PIL import Image
from scipy import ndimage

from conftest import Run, measure_arguments

EXPOSURES = "2,4,8,15,30,60,120,200,300"


@pytest.fixture(scope="session")
def bench(tmp_path_factory):
    """The demo's bench with all its fragments made."""
    folder = str(tmp_path_factory.mktemp("bench"))
    assert Run(["demo", folder, "--scenario", "bench"]).status == 0
    for channel in ("near", "wide"):
        calibrate(folder, "camera", "--channel", channel, "--dark", *glob(folder, "dark_"), "--flat",
                  *glob(folder, "light_"), "--exposures-ms", EXPOSURES, "-o", f"{folder}/{channel}_camera.ini")
        calibrate(folder, "flat", "--channel", channel, "--sample", "film", *glob(folder, f"film_{channel}_"), "-i",
                  f"{folder}/{channel}_camera.ini", "-o", f"{folder}/{channel}_flat.ini")
    return folder


def glob(folder, start):
    return sorted(f"{folder}/{name}" for name in os.listdir(folder) if name.startswith(start) and name.endswith(".tif"))


def calibrate(folder, *arguments):
    run = Run(["calibrate", *arguments])
    assert run.status == 0, run.err
    return run


def answer(folder, *arguments):
    return json.loads(calibrate(folder, *arguments, "--json").out)


def truth(folder):
    """The numbers of truth.txt."""
    with open(f"{folder}/truth.txt") as file:
        pairs = [line.split(" = ") for line in file if " = " in line]
    return {key: float(value) for key, value in pairs}


def refused(tmp_path, *arguments, words, status=2):
    run = Run(["calibrate", *arguments, "-o", str(tmp_path / "x.ini")])
    assert run.status == status, run.out + run.err
    for word in words:
        assert word in run.err, run.err
    assert not os.listdir(tmp_path) or not any(name.startswith("x") for name in os.listdir(tmp_path))


# ---- bead ------------------------------------------------------------------------------------------

def bead(bench, *more):
    return ["bead", *glob(bench, "beads_"), "-i", f"{bench}/bench.ini", "-i", f"{bench}/near_camera.ini", *more]


def test_beads_tell_depth_and_stray_light(bench, tmp_path):
    said = answer(bench, *bead(bench, "--radius-nm", "2500", "--radius-sd-nm", "25", "-o", str(tmp_path / "b.ini"),
                               "--plot", str(tmp_path / "b.png")))
    true = truth(bench)
    assert said["depth_nm"] == pytest.approx(true["depth_nm"], rel=0.01)
    assert said["scattered_fraction"] == pytest.approx(true["scattered_fraction"], abs=0.005)
    assert said["scattered_depth_nm"] == pytest.approx(true["scattered_depth_nm"], rel=0.05)
    # lambda / (4 pi d) by Pythagoras with the medium's index (closed form).
    depth_term = 488 / (4 * numpy.pi * said["depth_nm"])
    assert said["na_effective"] == pytest.approx(numpy.hypot(1.337, depth_term), rel=1e-7)
    # 1 % of radius is 1 % of depth.
    assert said["depth_sd_radius_nm"] == pytest.approx(0.01 * said["depth_nm"], rel=1e-6)
    assert said["depth_sd_nm"] > said["depth_sd_radius_nm"]
    assert said["verdict"] == "good" and said["beads_dim"] == 1
    assert Image.open(tmp_path / "b.png").size == (1300, 560)


def test_fragment_overrides_and_optics_shows_both(bench, tmp_path):
    calibrate(bench, *bead(bench, "--radius-nm", "2500", "-o", str(tmp_path / "b.ini")))
    optics = json.loads(Run(["optics", "-i", f"{bench}/bench.ini", "-i", str(tmp_path / "b.ini"), "--json"]).out)
    assert optics["depth_nm"] == pytest.approx(truth(bench)["depth_nm"], rel=0.01)
    assert [(e["key"], "bench.ini" in e["was"]) for e in optics["overridden"]] == [("angle_deg", True)]
    computed = 488 / (4 * numpy.pi * numpy.sqrt((1.518 * numpy.sin(numpy.radians(69.5)))**2 - 1.337**2))
    assert optics["overridden"][0]["depth_nm"] == pytest.approx(computed, rel=1e-6)
    assert "by what was overridden" in Run(["optics", "-i", f"{bench}/bench.ini", "-i", str(tmp_path / "b.ini")]).out


def test_the_same_bytes_again_and_with_other_threads(bench, tmp_path):
    for name, threads in (("a", "1"), ("b", "2")):
        calibrate(bench, *bead(bench, "--radius-nm", "2500", "--threads", threads, "-o", str(tmp_path / f"{name}.ini"),
                               "--plot", str(tmp_path / f"{name}.png")))
    for ending in (".ini", ".png"):
        assert (tmp_path / f"a{ending}").read_bytes() == (tmp_path / f"b{ending}").read_bytes()


@pytest.mark.parametrize("more, words", [
    (["--radius-nm", "5000"], ["thinner than any", "pixel size"]),
    (["--radius-nm", "1250"], ["the instrument file", "--despite-optics"]),
    (["--radius-nm", "2.5"], ["--radius-nm 2.5", "200 to 50000"]),
    (["--radius-nm", "200"], ["larger beads"]),
    (["--radius-nm", "2500", "--bead-n", "1.46"], ["frustrate total reflection"]),
    (["--radius-nm", "2500", "--dye", "medium"], ["where the dye is"]),
    (["--radius-nm", "2500", "--dye", "inside"], ["surface or medium"]),
    (["--radius-nm", "2500", "--medium-n", "1.45"], ["not above the beads' medium"]),
    (["--radius-nm", "2500", "--radius-sd-nm", "2000"], ["--radius-sd-nm"]),
    ([], ["--radius-nm 2500"])])
def test_beads_refused(bench, tmp_path, more, words):
    refused(tmp_path, *bead(bench, *more), words=words)


def test_too_few_and_saturated_beads(bench, tmp_path):
    images = glob(bench, "beads_")
    one = tifffile.imread(images[0])
    tifffile.imwrite(tmp_path / "few.tif", one[:150, :])
    usual = ["-i", f"{bench}/bench.ini", "-i", f"{bench}/near_camera.ini", "--radius-nm", "2500"]
    blank = open(f"{bench}/near_camera.ini").read().replace("defects", "#defects")
    (tmp_path / "camera.ini").write_text(blank)
    usual[3] = str(tmp_path / "camera.ini")
    refused(tmp_path, "bead", str(tmp_path / "few.tif"), *usual, words=["expected at least 5"])
    bright = numpy.minimum(one.astype(float) * 40, 62000).astype(numpy.uint16)
    tifffile.imwrite(tmp_path / "bright.tif", bright)
    refused(tmp_path, "bead", str(tmp_path / "bright.tif"), *usual, words=["saturated", "expose less"])


def test_despite_optics_writes_it(bench, tmp_path):
    run = calibrate(bench, *bead(bench, "--radius-nm", "1250", "--despite-optics", "-o", str(tmp_path / "b.ini")))
    assert "DIFFERS" in run.out and (tmp_path / "b.ini").exists()


# ---- camera ----------------------------------------------------------------------------------------

def test_camera(bench, tmp_path):
    said = answer(bench, "camera", "--channel", "near", "--dark", *glob(bench, "dark_"), "--flat", *glob(bench, "light_"),
                  "--exposures-ms", EXPOSURES, "-o", str(tmp_path / "c.ini"), "--plot", str(tmp_path / "c.png"))
    true = truth(bench)
    assert said["gain_e_per_adu"] == pytest.approx(true["gain_e_per_adu"], rel=0.02)
    assert said["read_noise_e"] == pytest.approx(true["read_noise_e"], rel=0.02)
    assert said["offset_adu"] == pytest.approx(true["offset_adu"], abs=0.05)
    assert said["full_scale_adu"] == true["full_scale_adu"]
    assert said["bad_pixels_dark"] == true["hot_pixels"]
    assert abs(said["gain_e_per_adu"] - true["gain_e_per_adu"]) < 4 * said["gain_sd_e_per_adu"]
    assert said["notes"] == [] and said["verdict"] == "good"
    assert numpy.count_nonzero(tifffile.imread(tmp_path / "c_defects.tif")) == true["hot_pixels"]
    text = (tmp_path / "c.ini").read_text()
    assert re.search(r"^defects = c_defects.tif$", text, re.M) and "[near.camera]" in text


def test_camera_from_stacks(bench, tmp_path):
    """All frames of a kind as pages of one file say the same."""
    for name, start in (("dark", "dark_"), ("light", "light_")):
        tifffile.imwrite(tmp_path / f"{name}.tif", numpy.stack([tifffile.imread(p) for p in glob(bench, start)]),
                         photometric="minisblack")
    single = answer(bench, "camera", "--channel", "near", "--dark", *glob(bench, "dark_"), "--flat",
                    *glob(bench, "light_"), "-o", str(tmp_path / "a.ini"))
    stacked = answer(bench, "camera", "--channel", "near", "--dark", str(tmp_path / "dark.tif"), "--flat",
                     str(tmp_path / "light.tif"), "-o", str(tmp_path / "b.ini"))
    assert single == stacked


def test_camera_refused(bench, tmp_path):
    dark, light = glob(bench, "dark_"), glob(bench, "light_")
    near = ["camera", "--channel", "near"]
    refused(tmp_path, *near, "--dark", *dark, "--flat", *light[:2], words=["exposures"])
    refused(tmp_path, *near, "--dark", *light[:2], "--flat", *dark[:4], words=["dark"])
    refused(tmp_path, *near, "--dark", *dark, "--flat", *light[:5], words=["no second frame"])
    refused(tmp_path, *near, "--dark", dark[0], "--flat", *light, words=["2"])
    refused(tmp_path, *near, "--dark", *dark, "--flat", light[0], light[0], light[2], light[3], words=["same"])
    refused(tmp_path, *near, "--dark", *dark, "--flat", *light[-2:], *light[-2:], words=["saturated"])
    refused(tmp_path, *near, "--dark", *dark, "--flat", *light, "--exposures-ms", "1,2", words=["2 exposures", "9 pairs"])
    refused(tmp_path, *near, "--dark", *dark, "--flat", *light, "--exposures-ms", "1,x", words=["--exposures-ms"])
    refused(tmp_path, "camera", "--dark", *dark, "--flat", *light, words=["--channel", "near or wide"])
    refused(tmp_path, *near, words=["--dark", "--flat"])
    refused(tmp_path, *near, dark[0], "--dark", *dark, "--flat", *light, words=["neither --dark nor --flat"])


# ---- flat ------------------------------------------------------------------------------------------

def test_flat_is_the_light(bench, tmp_path):
    """The light falls as a parabola to the corner, about a point off centre (scene/exposure.h)."""
    made = tifffile.imread(f"{bench}/near_flat.tif").astype(float)
    y, x = numpy.mgrid[0:384, 0:384]
    centre_x, centre_y = 191.5 + 0.05 * 384, 191.5 - 0.03 * 384
    light = 1 - truth(bench)["near falls to the corner by"] / (2 * 191.5**2) * ((x - centre_x)**2 + (y - centre_y)**2)
    light /= light.mean()
    assert made.dtype == float and abs(made.mean() - 1) < 1e-6
    assert numpy.std(made / light) < 0.003
    assert abs(numpy.median(made / light) - 1) < 0.001


def test_solution_is_warned_about(bench, tmp_path):
    run = calibrate(bench, "flat", "--channel", "near", "--sample", "solution", *glob(bench, "film_near_"), "-i",
                    f"{bench}/bench.ini", "-i", f"{bench}/near_camera.ini", "-o", str(tmp_path / "f.ini"))
    # 10 % of 1200 nm against 90 % of 80.3 nm (closed form): 62 %.
    assert "CAUTION" in run.out and "62 %" in run.out
    wide = calibrate(bench, "flat", "--channel", "wide", "--sample", "solution", *glob(bench, "film_wide_"), "-o",
                     str(tmp_path / "g.ini"))
    assert "CAUTION" not in wide.out


def test_flat_refused(bench, tmp_path):
    films = glob(bench, "film_near_")
    rng = numpy.random.default_rng(5)
    for k in range(4):
        tifffile.imwrite(tmp_path / f"dim{k}.tif", (100 + rng.poisson(30, (200, 200))).astype(numpy.uint16))
    (tmp_path / "offset.ini").write_text("[near.camera]\noffset_adu = 100\n")
    near = ["flat", "--channel", "near", "--sample", "film"]
    refused(tmp_path, *near, *[str(tmp_path / f"dim{k}.tif") for k in range(4)], "-i", str(tmp_path / "offset.ini"),
            words=["noise", "--smooth-px"])
    refused(tmp_path, *near, *films[:2], words=["3"])
    refused(tmp_path, *near, films[0], films[0], films[1], words=["same"])
    refused(tmp_path, *near, words=["images of an even sample"])
    refused(tmp_path, "flat", "--channel", "near", *films, words=["--sample"])
    refused(tmp_path, *near, *films[:4], str(tmp_path / "dim0.tif"), words=["dim0.tif"])


# ---- shift -----------------------------------------------------------------------------------------

def test_shift(bench, tmp_path):
    said = answer(bench, "shift", f"{bench}/shift_near.tif", f"{bench}/shift_wide.tif", "-o", str(tmp_path / "s.ini"))
    true = truth(bench)
    assert said["dx_px"] == pytest.approx(true["shift_dx_px"], abs=0.05)
    assert said["dy_px"] == pytest.approx(true["shift_dy_px"], abs=0.05)
    assert said["plain_shift_is_enough"]


def test_rotation_and_scale_are_told(bench, tmp_path):
    """The wide image turned and enlarged about its centre by scipy."""
    wide = tifffile.imread(f"{bench}/shift_wide.tif").astype(float)
    angle, scale = numpy.radians(0.6), 1.004
    turn = numpy.array([[numpy.cos(angle), -numpy.sin(angle)], [numpy.sin(angle), numpy.cos(angle)]]) / scale
    centre = numpy.array([191.5, 191.5])
    turned = ndimage.affine_transform(wide, turn, centre - turn @ centre, order=3, mode="nearest")
    tifffile.imwrite(tmp_path / "turned.tif", numpy.clip(numpy.rint(turned), 0, 65535).astype(numpy.uint16))
    said = answer(bench, "shift", f"{bench}/shift_near.tif", str(tmp_path / "turned.tif"), "-o", str(tmp_path / "s.ini"),
                  "--plot", str(tmp_path / "s.png"))
    # scipy's matrix maps out to in, rows first: content turns by +0.6 deg from x towards y.
    assert said["rotation_deg"] == pytest.approx(0.6, abs=0.05)
    assert said["scale_minus_1"] == pytest.approx(0.004, abs=0.001)
    assert not said["plain_shift_is_enough"]
    assert Image.open(tmp_path / "s.png").size == (1300, 560)


def test_shift_refused(bench, tmp_path):
    rng = numpy.random.default_rng(6)
    for name in "ab":
        tifffile.imwrite(tmp_path / f"{name}.tif", rng.poisson(500, (300, 300)).astype(numpy.uint16))
    refused(tmp_path, "shift", str(tmp_path / "a.tif"), str(tmp_path / "b.tif"), words=["cannot be told", "1 is chance"])
    refused(tmp_path, "shift", str(tmp_path / "a.tif"), words=["in pairs"])
    refused(tmp_path, "shift", str(tmp_path / "a.tif"), f"{bench}/shift_wide.tif", words=["300 x 300", "384 x 384"])


# ---- reference -------------------------------------------------------------------------------------

def fragments(bench, *names):
    return [word for name in names for word in ("-i", f"{bench}/{name}.ini")]


def film(bench, *more):
    return ["reference", f"{bench}/spacer_near.tif", f"{bench}/spacer_wide.tif", "--kind", "film", "--gap-nm", "15",
            *fragments(bench, "bench", "near_camera", "wide_camera", "near_flat", "wide_flat"), *more]


def test_film(bench, tmp_path):
    said = answer(bench, *film(bench, "-o", str(tmp_path / "r.ini")))
    true = truth(bench)
    share, gap = true["scattered_fraction"], true["spacer_nm"]
    decay = (1 - share) * numpy.exp(-gap / true["depth_nm"]) + share * numpy.exp(-gap / true["scattered_depth_nm"])
    assert said["ratio"] == pytest.approx(true["film ratio at gap 0"] * decay, rel=0.005)
    row = next(csv.DictReader(open(tmp_path / "r.csv")))
    assert float(row["ratio"]) == pytest.approx(said["ratio"], rel=1e-5) and row["kind"] == "film"
    assert re.fullmatch("[0-9a-f]{16}", row["near_flat_checksum"])


def test_a_run_with_other_flats_is_refused_naming_both(bench, tmp_path):
    calibrate(bench, *film(bench, "-o", str(tmp_path / "r.ini")))
    arguments = ["measure", f"{bench}/shift_near.tif", f"{bench}/shift_wide.tif", "-o", str(tmp_path / "out")]
    usual = fragments(bench, "bench", "near_camera", "wide_camera", "near_flat", "wide_flat")
    same = Run([*arguments, *usual, "-i", str(tmp_path / "r.ini")])
    assert same.status == 0, same.err
    other = tifffile.imread(f"{bench}/near_flat.tif")
    tifffile.imwrite(tmp_path / "other.tif", other * 1.001)
    (tmp_path / "other.ini").write_text("[near.flat]\nfile = other.tif\n")
    run = Run([*arguments, *usual, "-i", str(tmp_path / "other.ini"), "-i", str(tmp_path / "r.ini")])
    recorded = re.search("near_flat_checksum = (.*)", (tmp_path / "r.ini").read_text()).group(1)
    assert run.status == 2 and recorded in run.err and "other.tif" in run.err and "r.ini" in run.err
    none = Run([*arguments, *fragments(bench, "bench", "near_camera", "wide_camera"), "-i", str(tmp_path / "r.ini")])
    assert none.status == 2 and "no flat" in none.err


def test_exposures_convert_the_ratio(bench, tmp_path):
    """Twice the near exposure is twice the ratio: the same gaps from a doubled near image (closed form)."""
    near = tifffile.imread(f"{bench}/shift_near.tif").astype(float)
    tifffile.imwrite(tmp_path / "double.tif", numpy.clip(2 * (near - 100) + 100, 0, 65535).astype(numpy.uint16))
    calibrate(bench, *film(bench, "--exposure-near-ms", "50", "--exposure-wide-ms", "20", "-o", str(tmp_path / "r.ini")))
    usual = fragments(bench, "bench", "near_camera", "wide_camera", "near_flat", "wide_flat")
    gaps = []
    for name, image, exposure in (("one", f"{bench}/shift_near.tif", 50), ("two", str(tmp_path / "double.tif"), 100)):
        (tmp_path / f"{name}.ini").write_text(f"[near.camera]\nexposure_ms = {exposure}\n[wide.camera]\nexposure_ms = 20\n")
        run = Run(["measure", image, f"{bench}/shift_wide.tif", *usual, "-i", str(tmp_path / "r.ini"), "-i",
                   str(tmp_path / f"{name}.ini"), "-o", str(tmp_path / name)])
        assert run.status == 0, run.err
        assert ("its ratio is converted" in run.err) == (exposure == 100)
        gaps.append([float(row["gap_median_nm"]) for row in csv.DictReader(open(tmp_path / name / "cells.csv"))])
    assert len(gaps[0]) == len(gaps[1]) > 3
    assert numpy.max(numpy.abs(numpy.subtract(*gaps))) < 0.5


def test_cells_whose_gap_is_known(demo, tmp_path):
    """All cells of the demo's field b put at one gap: the reference found must give that gap back."""
    pair = [f"{demo}/day1_a_near.tif", f"{demo}/day1_a_wide.tif"]
    calibrate(demo, "reference", *pair, "--kind", "cell", "--gap-nm", "60", "-i", f"{demo}/day1.ini", "-a",
              f"{demo}/assay.ini", "-o", str(tmp_path / "r.ini"))
    arguments = measure_arguments(demo, str(tmp_path / "out"))
    run = Run([*arguments[:5], "-i", str(tmp_path / "r.ini"), *arguments[5:]])
    assert run.status == 0, run.err
    cores = [float(row["gap_core_median_nm"]) for row in csv.DictReader(open(tmp_path / "out" / "cells.csv"))
             if row["used"] == "yes"]
    assert numpy.median(cores) == pytest.approx(60, abs=1)


def test_wells_of_a_sheet(tmp_path):
    demo = str(tmp_path / "doses")
    assert Run(["demo", demo, "--scenario", "doses"]).status == 0
    said = answer(demo, "reference", "--sheet", f"{demo}/sheet.csv", "-a", f"{demo}/assay.ini", "-o",
                  str(tmp_path / "r.ini"))
    rows = list(csv.DictReader(open(tmp_path / "r.csv")))
    assert [row["plate"] for row in rows] == ["plate1", "plate2", "plate3"] and len(said["references"]) == 3
    assert all(row["wells"] == "8" and row["kind"] == "wells" and row["worst_well"] for row in rows)
    assert {name for name in os.listdir(tmp_path) if name.startswith("r_")} == {
        f"r_plate{k}_plate{k}.ini" for k in (1, 2, 3)}
    assert "gap_is = assumed" in (tmp_path / "r_plate1_plate1.ini").read_text()
    shutil.copy(tmp_path / "r_plate1_plate1.ini", f"{demo}/r.ini")
    run = Run(["measure", f"{demo}/plate1_B02_near.tif", f"{demo}/plate1_B02_wide.tif", "-i", f"{demo}/plate1.ini", "-i",
               f"{demo}/r.ini", "-a", f"{demo}/assay.ini", "-o", str(tmp_path / "out")])
    assert run.status == 0 and "relative" in run.err, run.err


def test_reference_refused(bench, demo, tmp_path):
    pair = [f"{bench}/spacer_near.tif", f"{bench}/spacer_wide.tif"]
    usual = fragments(bench, "bench", "near_camera", "wide_camera")
    refused(tmp_path, "reference", *pair, *usual, "--gap-nm", "15", words=["--kind", "cell or film"])
    refused(tmp_path, "reference", *pair, *usual, "--kind", "film", words=["--gap-nm 15"])
    refused(tmp_path, "reference", pair[0], *usual, "--kind", "film", "--gap-nm", "15", words=["in pairs"])
    refused(tmp_path, "reference", *pair, *usual, "--kind", "film", "--gap-nm", "15", "--blank-near", pair[0],
            words=["blank images come in pairs"])
    refused(tmp_path, "reference", *pair, *usual, "--kind", "film", "--gap-nm", "15", "--blank-near", pair[0],
            "--blank-wide", pair[1], words=["no part of the film"])
    refused(tmp_path, "reference", *pair, "-i", f"{demo}/day1.ini", "--kind", "cell", "--gap-nm", "15",
            words=["day1_flat_near.tif"])
    (tmp_path / "s.csv").write_text(f"near,wide\n{pair[0]},{pair[1]}\n")
    refused(tmp_path, "reference", "--sheet", str(tmp_path / "s.csv"), *usual, words=["role reference or control"])


# ---- the command -----------------------------------------------------------------------------------

def test_kinds_are_listed_and_unknown_ones_named():
    page = Run(["calibrate", "--help"])
    assert page.status == 0 and all(kind in page.out for kind in ("bead", "camera", "flat", "shift", "reference"))
    assert Run(["calibrate"]).status == 2
    wrong = Run(["calibrate", "beads"])
    assert wrong.status == 2 and "expected bead, camera, flat, shift, reference" in wrong.err
    assert "kind first" in Run(["calibrate", "-i", "x.ini"]).err
    for kind in ("bead", "camera", "flat", "shift", "reference"):
        run = Run(["calibrate", kind, "--help"])
        assert run.status == 0 and "Example:" in run.out
        assert "-o FILE" in Run(["calibrate", kind]).err


def test_results_that_cannot_be_written(bench):
    run = Run(["calibrate", "shift", f"{bench}/shift_near.tif", f"{bench}/shift_wide.tif", "-o", "/proc/nowhere/x.ini"])
    assert run.status == 3 and "/proc/nowhere" in run.err
