"""The main job from its two images to tables and pictures, against the truth the demo's maker wrote down."""
import csv
import glob
import json
import math
import os
import re
import subprocess

import numpy
import pytest
import tifffile

from conftest import ROOT, Run, measure_arguments, tree

TABLES = ("cells.csv", "spots.csv", "fields.csv")
PICTURES = ("overlay/day1_a_near.png", "outlines/day1_a_near.json", "gap/day1_a_near.tif", "labels/day1_a_near.tif")


def rows(path):
    with open(path, newline="") as file:
        return list(csv.DictReader(file))


def number(text):
    return float(text) if text else float("nan")


# ---- what is written -------------------------------------------------------------------------------------


def test_all_results_are_there_and_nothing_else(results):
    assert set(tree(results["a"])) == set(TABLES) | set(PICTURES) | {"run.json"}


def test_summary_says_what_was_found_and_where(demo, tmp_path):
    run = Run(measure_arguments(demo, tmp_path / "out"))
    cells = rows(tmp_path / "out/cells.csv")
    assert re.match(rf"{len(cells)} cells", run.out)
    assert "overlay/day1_a_near.png" in run.out
    used = [r for r in cells if r["used"] == "yes"]
    attached = [r for r in used if number(r["attachment_fraction"]) >= 0.1]  # the default threshold
    assert f"{len(attached)} of {len(used)} used cells are attached" in run.out


def test_quiet_prints_nothing(demo, tmp_path):
    run = Run(measure_arguments(demo, tmp_path / "out") + ["--quiet"])
    assert (run.status, run.out, run.err) == (0, "", "")


def test_no_missing_value_is_written_as_a_word(results):
    for table in TABLES:
        with open(os.path.join(results["c"], table)) as file:
            text = file.read()
        assert not re.search(r"(^|,)-?(nan|inf)(,|$)", text, re.I | re.M)


def test_bands_add_up_to_the_spread_area(results):
    # definition of the columns
    for field in results:
        for row in rows(os.path.join(results[field], "cells.csv")):
            parts = [number(row[k]) for k in ("band_focal_um2", "band_close_um2", "band_far_um2", "unresolved_um2")]
            assert sum(parts) == pytest.approx(number(row["spread_area_um2"]), rel=2e-5)


def test_tables_agree_with_the_maps(results):
    # area, contact and medians of each cell again from labels and gap TIFF, by numpy
    labels, gap = (tifffile.imread(f"{results['a']}/{k}/day1_a_near.tif") for k in ("labels", "gap"))
    for row in rows(f"{results['a']}/cells.csv"):
        inside = gap[labels == int(row["cell"])]
        um2 = 0.11 ** 2
        assert inside.size * um2 == pytest.approx(number(row["spread_area_um2"]), rel=1e-5)
        assert not numpy.isnan(inside).any()
        assert numpy.median(inside) == pytest.approx(number(row["gap_median_nm"]), abs=2e-3)
        assert (inside <= 25).sum() * um2 == pytest.approx(number(row["band_focal_um2"]), rel=1e-5, abs=1e-9)
        small_patches = (inside <= 50).sum() * um2 - number(row["contact_area_um2"])
        assert -1e-3 <= small_patches < 0.03 * number(row["spread_area_um2"])
    assert numpy.isnan(gap[labels == 0]).all()


def test_run_json_tells_settings_inputs_and_method(results, demo):
    with open(f"{results['a']}/run.json") as file:
        story = json.load(file)
    settings = {(s["section"], s["key"]): s for s in story["settings"]}
    assert settings["light", "wavelength_nm"]["value"] == "488"
    assert settings["light", "wavelength_nm"]["from"].startswith(f"{demo}/day1.ini:")
    assert settings["contact", "focal_nm"]["from"] == "default"
    assert {i["role"] for i in story["inputs"]} == {"near", "wide", "near flat", "wide flat"}
    assert "half of each cell's own level" in story["methods"]
    # closed form: wavelength / (4 pi sqrt(n1^2 sin^2 - n2^2))
    depth = 488 / (4 * math.pi * math.sqrt((1.518 * math.sin(math.radians(70))) ** 2 - 1.337 ** 2))
    assert story["in_force"]["depth_nm"] == pytest.approx(depth, rel=1e-9)


# ---- against the truth -------------------------------------------------------------------------------------


def matched(demo, folder, field):
    """Pairs (true label, found label) with an overlap of more than half of their union."""
    truth = tifffile.imread(f"{demo}/day1_{field}_truth_labels.tif").astype(int)
    found = tifffile.imread(f"{folder}/labels/day1_{field}_near.tif").astype(int)
    pairs = []
    for t in range(1, truth.max() + 1):
        inside = found[truth == t]
        best = numpy.bincount(inside).argmax()
        union = ((truth == t) | (found == best)).sum()
        if best and (inside == best).sum() / union > 0.5:
            pairs.append((t, best))
    return truth, found, pairs


def test_cells_contact_and_gaps_match_the_truth(demo, results):
    # the limits are those of the accuracy asked for: area 4 %, attachment fraction 0.03, median gap 4 nm
    true_cells = found_cells = both = 0
    area_errors, fraction_errors, gap_errors = [], [], []
    for field, folder in results.items():
        truth, found, pairs = matched(demo, folder, field)
        gap = tifffile.imread(f"{demo}/day1_{field}_truth_gap.tif")
        table = {int(r["cell"]): r for r in rows(f"{folder}/cells.csv")}
        true_cells, found_cells, both = true_cells + truth.max(), found_cells + found.max(), both + len(pairs)
        for t, f in pairs:
            inside = gap[truth == t]
            area_errors.append(number(table[f]["spread_area_um2"]) / (inside.size * 0.11 ** 2) - 1)
            fraction_errors.append(number(table[f]["attachment_fraction"]) - (inside <= 50).mean())
            if numpy.median(inside) < 150:
                gap_errors.append(number(table[f]["gap_median_nm"]) - numpy.median(inside))
    assert 2 * both / (true_cells + found_cells) >= 0.95
    assert numpy.mean(numpy.abs(area_errors)) <= 0.04
    assert numpy.mean(numpy.abs(fraction_errors)) <= 0.03
    assert numpy.mean(numpy.abs(gap_errors)) <= 4.0


def test_spots_match_the_truth(demo, results):
    true = found = hits = 0
    with open(f"{demo}/truth_spots.csv", newline="") as file:
        truth = list(csv.DictReader(file))
    for field, folder in results.items():
        t = numpy.array([[float(r["x_px"]), float(r["y_px"])] for r in truth if r["field"] == f"day1_{field}"])
        f = numpy.array([[number(r["x_px"]), number(r["y_px"])] for r in rows(f"{folder}/spots.csv")])
        distance = numpy.hypot(*(t[:, None] - f[None]).transpose(2, 0, 1)) * 0.11
        hits += (distance.min(axis=1) <= 0.7).sum()
        true, found = true + len(t), found + len(f)
    assert 2 * hits / (true + found) >= 0.75


def test_shift_is_found(results):
    # the demo moves wide by (1.4, -0.8) px
    for folder in results.values():
        field = rows(f"{folder}/fields.csv")[0]
        assert number(field["shift_dx_px"]) == pytest.approx(1.4, abs=0.1)
        assert number(field["shift_dy_px"]) == pytest.approx(-0.8, abs=0.1)


# ---- the same bytes --------------------------------------------------------------------------------------------


def steady(folder):
    """A result folder's files, without what may vary between runs."""
    files = tree(folder)
    story = json.loads(files["run.json"])
    del story["varies_between_runs"]
    files["run.json"] = json.dumps(story)
    return files


@pytest.mark.parametrize("threads", [1, 2, 7])
def test_same_bytes_for_any_number_of_threads(demo, results, tmp_path, threads):
    run = Run(measure_arguments(demo, tmp_path / "out") + ["--threads", threads])
    assert run.status == 0
    assert steady(tmp_path / "out") == steady(results["a"])


def test_same_bytes_for_the_baseline_kernels(demo, results, tmp_path):
    run = Run(measure_arguments(demo, tmp_path / "out"), env={"UNDERFOOT_KERNELS": "baseline"})
    assert run.status == 0
    assert steady(tmp_path / "out") == steady(results["a"])


@pytest.mark.parametrize("build", ["clang", "asan", "tsan"])
def test_same_bytes_from_other_builds(demo, results, tmp_path, build):
    # and what the sanitizers have to say: nothing
    program = os.path.join(ROOT, f"build/{build}/underfoot")
    run = Run(measure_arguments(demo, tmp_path / "out") + ["--threads", 4], program=program)
    assert run.status == 0, run.err
    assert "Sanitizer" not in run.err
    assert steady(tmp_path / "out") == steady(results["a"])


def test_demo_is_the_same_every_time_and_in_every_build(demo, tmp_path):
    for build in ("release", "clang", "asan"):
        run = Run(["demo", tmp_path / build, "--quiet"], program=os.path.join(ROOT, f"build/{build}/underfoot"))
        assert run.status == 0, run.err
        assert tree(tmp_path / build) == tree(demo)


def test_locale_does_not_matter(demo, results, tmp_path):
    run = Run(measure_arguments(demo, tmp_path / "out"), env={"LC_ALL": "de_DE.UTF-8", "LANG": "de_DE.UTF-8"})
    assert run.status == 0
    assert steady(tmp_path / "out") == steady(results["a"])


# ---- again into the same folder -----------------------------------------------------------------------------------


def test_a_second_run_replaces_the_first(demo, tmp_path):
    assert Run(measure_arguments(demo, tmp_path / "out")).status == 0
    with open(f"{demo}/assay.ini") as file:
        assay = file.read().replace("maps = yes", "maps = no").replace("overlay = yes", "overlay = no")
    (tmp_path / "assay.ini").write_text(assay)
    arguments = measure_arguments(demo, tmp_path / "out")
    arguments[arguments.index("-a") + 1] = tmp_path / "assay.ini"
    assert Run(arguments).status == 0
    # maps that this run did not make must not look like its own
    assert set(tree(tmp_path / "out")) == set(TABLES) | {"run.json"}


# ---- fields that are not as they should be ------------------------------------------------------------------------


def flat_pair(folder, size=256, value=600):
    """Two images of nothing but background, as a camera of gain 2.17 would take them."""
    random = numpy.random.default_rng(5)
    for name in ("near", "wide"):
        electrons = random.poisson((value - 100) * 2.17, (size, size))
        tifffile.imwrite(folder / f"{name}.tif", numpy.rint(100 + electrons / 2.17).astype(numpy.uint16))


def instrument_without_flats(demo):
    with open(f"{demo}/day1.ini") as file:
        return re.sub(r"\n\[(near|wide)\.flat\]\nfile = .*\n", "\n", file.read())


def test_blank_field_has_no_cells_and_says_empty(demo, tmp_path):
    flat_pair(tmp_path)
    (tmp_path / "i.ini").write_text(instrument_without_flats(demo).replace("estimate = yes", "estimate = no"))
    run = Run(measure_arguments(demo, tmp_path / "out", near=tmp_path / "near.tif", wide=tmp_path / "wide.tif",
                                instrument=tmp_path / "i.ini"))
    assert run.status == 0, run.err
    field = rows(tmp_path / "out/fields.csv")[0]
    assert (field["cells"], field["flags"], field["status"]) == ("0", "empty", "flagged")
    assert rows(tmp_path / "out/cells.csv") == []


@pytest.mark.parametrize("size", [1, 2, 7, 31])
def test_tiny_fields_are_measured_or_empty(demo, tmp_path, size):
    flat_pair(tmp_path, size)
    (tmp_path / "i.ini").write_text(instrument_without_flats(demo))
    for build in ("release", "asan"):
        run = Run(measure_arguments(demo, tmp_path / build, near=tmp_path / "near.tif", wide=tmp_path / "wide.tif",
                                    instrument=tmp_path / "i.ini"),
                  program=os.path.join(ROOT, f"build/{build}/underfoot"))
        assert run.status == 0, run.err


def test_a_constant_image_is_empty(demo, tmp_path):
    for name in ("near", "wide"):
        tifffile.imwrite(tmp_path / f"{name}.tif", numpy.full((97, 83), 300 + (name == "wide"), numpy.uint16))
    (tmp_path / "i.ini").write_text(instrument_without_flats(demo))
    run = Run(measure_arguments(demo, tmp_path / "out", near=tmp_path / "near.tif", wide=tmp_path / "wide.tif",
                                instrument=tmp_path / "i.ini"), program=os.path.join(ROOT, "build/asan/underfoot"))
    assert run.status == 0, run.err
    assert rows(tmp_path / "out/fields.csv")[0]["cells"] == "0"


def test_saturated_cells_are_flagged(demo, tmp_path):
    near = tifffile.imread(f"{demo}/day1_a_near.tif")
    tifffile.imwrite(tmp_path / "near.tif", numpy.minimum(near, 4000))
    with open(f"{demo}/day1.ini") as file:
        text = file.read().replace("full_scale_adu = 65535", "full_scale_adu = 4000", 1)
    (tmp_path / "i.ini").write_text(text.replace("file = day1_flat", f"file = {demo}/day1_flat"))
    run = Run(measure_arguments(demo, tmp_path / "out", near=tmp_path / "near.tif", instrument=tmp_path / "i.ini"))
    assert run.status == 0, run.err
    assert float(rows(tmp_path / "out/fields.csv")[0]["near_saturated_fraction"]) > 0.01
    assert any("saturated" in r["flags"] for r in rows(tmp_path / "out/cells.csv"))


def test_dark_frame_does_what_the_offset_does(demo, results, tmp_path):
    # closed form: a dark image of the offset everywhere is the offset
    tifffile.imwrite(tmp_path / "dark.tif", numpy.full((512, 512), 100, numpy.uint16))
    (tmp_path / "extra.ini").write_text(f"[near.camera]\ndark = dark.tif\noffset_adu = 7\n")
    run = Run(measure_arguments(demo, tmp_path / "out") + ["-i", tmp_path / "extra.ini"])
    assert run.status == 0, run.err
    assert tree(tmp_path / "out")["cells.csv"] == tree(results["a"])["cells.csv"]


def test_defects_and_hot_pixels_leave_the_results_alone(demo, results, tmp_path):
    near = tifffile.imread(f"{demo}/day1_a_near.tif")
    random = numpy.random.default_rng(3)
    defects = numpy.zeros(near.shape, numpy.uint8)
    spoiled = near.copy()
    for y, x in random.integers(5, 500, (40, 2)):
        spoiled[y, x], defects[y, x] = 65000, 1
    for y, x in random.integers(5, 500, (15, 2)):
        spoiled[y, x] = 50000  # hot, and not on the map
    tifffile.imwrite(tmp_path / "near.tif", spoiled)
    tifffile.imwrite(tmp_path / "defects.tif", defects)
    (tmp_path / "extra.ini").write_text("[near.camera]\ndefects = defects.tif\n")
    run = Run(measure_arguments(demo, tmp_path / "out", near=tmp_path / "near.tif") + ["-i", tmp_path / "extra.ini"])
    assert run.status == 0, run.err
    clean, mended = rows(f"{results['a']}/cells.csv"), rows(tmp_path / "out/cells.csv")
    assert len(clean) == len(mended)
    for a, b in zip(clean, mended):
        assert number(b["contact_area_um2"]) == pytest.approx(number(a["contact_area_um2"]), rel=0.01, abs=0.3)
    assert len(rows(f"{results['a']}/spots.csv")) == pytest.approx(len(rows(tmp_path / "out/spots.csv")), abs=2)


# ---- installation ---------------------------------------------------------------------------------------------------


def test_install_and_uninstall_leave_nothing(tmp_path):
    def make(target):
        return subprocess.run(["make", "-s", target, f"DESTDIR={tmp_path}", "PREFIX=/usr"], cwd=ROOT,
                              capture_output=True, text=True)
    done = make("install")
    assert done.returncode == 0, done.stderr
    assert Run(["--version"], program=f"{tmp_path}/usr/bin/underfoot").out.startswith("underfoot ")
    # a program of somebody else, against the header and the shared library that were installed
    (tmp_path / "user.c").write_text('#include <underfoot.h>\n#include <stdio.h>\n'
                                     'int main(void) { printf("%.6f\\n", uf_depth_nm(488, 1.426453, 1.33)); }\n')
    subprocess.run(["gcc", "-o", tmp_path / "user", tmp_path / "user.c", f"-I{tmp_path}/usr/include",
                    f"-L{tmp_path}/usr/lib", "-lunderfoot", f"-Wl,-rpath,{tmp_path}/usr/lib"], check=True)
    printed = subprocess.run([tmp_path / "user"], capture_output=True, text=True, check=True).stdout
    assert float(printed) == pytest.approx(75.314, abs=0.01)
    assert make("uninstall").returncode == 0
    assert [p for p in glob.glob(f"{tmp_path}/usr/**", recursive=True) if os.path.isfile(p)] == []
