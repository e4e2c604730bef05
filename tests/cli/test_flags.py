# SPDX-License-Identifier: GPL-3.0-or-later
"""Each flag raised by a field that deserves it, made from the demo's first field, and none by that field itself."""
import csv

import numpy
import pytest
import tifffile
from scipy import ndimage

from conftest import Run, measure_arguments

OFFSET = 100


def rows(path):
    with open(path, newline="") as file:
        return list(csv.DictReader(file))


@pytest.fixture
def flags(demo, tmp_path):
    """Measures a spoilt pair: (flags of the field, flags of the cells)."""
    def measure(near, wide, changes=(), more=()):
        for name, image in (("near", near), ("wide", wide)):
            tifffile.imwrite(tmp_path / f"{name}.tif", numpy.clip(numpy.rint(image), 0, 65535).astype(numpy.uint16))
        with open(f"{demo}/day1.ini") as file:
            text = file.read().replace("file = day1", f"file = {demo}/day1")
        for old, new in changes:
            assert old in text
            text = text.replace(old, new)
        (tmp_path / "bench.ini").write_text(text)
        run = Run(["measure", str(tmp_path / "near.tif"), str(tmp_path / "wide.tif"), "-i", str(tmp_path / "bench.ini"),
                   "-a", f"{demo}/assay.ini", "-o", str(tmp_path / "out"), *more])
        assert run.status == 0, run.err
        cells = [set(row["flags"].split(";")) - {""} for row in rows(tmp_path / "out/cells.csv")]
        return set(rows(tmp_path / "out/fields.csv")[0]["flags"].split(";")) - {""}, cells
    return measure


@pytest.fixture
def pair(demo):
    return tuple(tifffile.imread(f"{demo}/day1_a_{k}.tif").astype(float) for k in ("near", "wide"))


def test_a_good_field_has_none(flags, pair):
    field, cells = flags(*pair)
    assert field == set()
    assert set().union(*cells) <= {"touching"}


def noisy(image, seed=5):
    """Photon noise of the demo's camera put back after blurring or dimming took it out: 2.17 electrons a count."""
    dice = numpy.random.default_rng(seed)
    return dice.poisson(numpy.maximum(image - OFFSET, 0) * 2.17) / 2.17 + OFFSET


def test_out_of_focus(flags, pair):
    near, wide = (noisy(ndimage.gaussian_filter(image, 6)) for image in pair)
    assert "out_of_focus" in flags(near, wide)[0]


def test_uneven(flags, pair):
    slope = numpy.linspace(0, 300, 512)[None, :]
    assert "uneven" in flags(pair[0] + slope, pair[1])[0]


def test_low_signal(flags, pair):
    near, wide = (noisy((image - OFFSET) / 250 + OFFSET + 40) for image in pair)
    field, cells = flags(near, wide)
    assert "low_signal" in field or "empty" in field


def test_near_too_bright(flags, pair):
    assert "near_too_bright" in flags(*pair, changes=[("ratio = 1.5", "ratio = 0.3"), ("ratio_sd = 0.03", "ratio_sd = 0")])[0]


def test_channels_swapped(flags, pair):
    assert "channels_swapped" in flags(pair[1], pair[0])[0]


def test_moved_cells(flags, pair):
    # the near image of everything moved by 1.6 um; the bench says there is no shift, and none is estimated
    near = numpy.roll(pair[0], 15, axis=1)
    field, cells = flags(near, pair[1], changes=[("estimate = yes", "estimate = no")])
    assert sum("moved" in flag for flag in cells) >= 0.7 * len(cells)


def test_clipped(flags, pair):
    near = numpy.maximum(pair[0] - 2500, 0)
    field, cells = flags(near, pair[1])
    assert "clipped" in field and any("clipped" in flag for flag in cells)


def test_saturated(flags, pair):
    near = numpy.minimum(pair[0], 5000)
    field, cells = flags(near, pair[1], changes=[("full_scale_adu = 65535", "full_scale_adu = 5000")])
    assert "saturated" in field and any("saturated" in flag for flag in cells)


def test_crowded(flags, pair, tmp_path):
    mask = numpy.ones((512, 512), numpy.uint16)
    mask[:, 256:] = 2
    mask[:8] = 0
    tifffile.imwrite(tmp_path / "mask.tif", mask)
    assert "crowded" in flags(*pair, more=("-m", str(tmp_path / "mask.tif")))[0]


def test_shift_differs(flags, pair):
    field, _ = flags(*pair, changes=[("estimate = yes", "estimate = check"), ])
    assert "shift_differs" in field  # the demo's shift is 1.4, -0.8 px, the file says 0, 0


def test_display_scaled(flags, pair, tmp_path, demo):
    near, wide = (numpy.clip((image - image.min()) / numpy.percentile(image, 99) * 255, 0, 255).astype(numpy.uint8)
                  for image in pair)
    tifffile.imwrite(tmp_path / "n8.tif", near)
    tifffile.imwrite(tmp_path / "w8.tif", wide)
    with open(f"{demo}/day1.ini") as file:
        text = file.read().replace("file = day1", f"file = {demo}/day1").replace("offset_adu = 100", "offset_adu = 0")
    (tmp_path / "b.ini").write_text(text.replace("full_scale_adu = 65535\n", ""))
    run = Run(["measure", str(tmp_path / "n8.tif"), str(tmp_path / "w8.tif"), "-i", str(tmp_path / "b.ini"), "-a",
               f"{demo}/assay.ini", "-o", str(tmp_path / "out8")])
    assert run.status == 0, run.err
    assert "display_scaled" in rows(tmp_path / "out8/fields.csv")[0]["flags"]


def test_empty_is_empty_and_nothing_else(flags, demo):
    dice = numpy.random.default_rng(3)
    blank = [dice.poisson(350 * 2.17 * tifffile.imread(f"{demo}/day1_flat_{k}.tif")) / 2.17 + OFFSET
             for k in ("near", "wide")]
    assert flags(*blank)[0] == {"empty"}


def test_the_summary_says_what_flags_ask_for(demo, tmp_path):
    wrong = tmp_path / "reference.ini"
    wrong.write_text("[reference]\nratio = 1e-9\n")
    arguments = measure_arguments(demo, str(tmp_path / "out"))
    run = Run(arguments[:5] + ["-i", str(wrong)] + arguments[5:])
    assert run.status == 0 and "near_too_bright: near is brighter" in run.out and "[reference]" in run.out
    row = next(csv.DictReader(open(tmp_path / "out" / "cells.csv")))
    assert row["gap_limit_nm"] == ""


def test_twelve_bits_in_sixteen_saturate_without_being_told(demo, tmp_path):
    """Counts cut at 4095 pile up there; the same images with full_scale_adu given say the same."""
    pair = []
    for channel in ("near", "wide"):
        image = tifffile.imread(f"{demo}/day1_a_{channel}.tif")
        pair.append(str(tmp_path / f"{channel}.tif"))
        tifffile.imwrite(pair[-1], numpy.minimum(image, 4095))
    text = open(f"{demo}/day1.ini").read().replace("file = day1", f"file = {demo}/day1")
    tables = []
    for name, change in (("told", "full_scale_adu = 4095"), ("untold", "")):
        (tmp_path / f"{name}.ini").write_text(text.replace("full_scale_adu = 65535", change))
        run = Run(["measure", *pair, "-i", str(tmp_path / f"{name}.ini"), "-a", f"{demo}/assay.ini", "-o", str(tmp_path / name)])
        assert run.status == 0 and "saturated" in run.out
        tables.append((tmp_path / name / "cells.csv").read_text())
    assert tables[0] == tables[1]


def test_an_angle_that_lights_cells_is_flagged(demo, tmp_path):
    text = open(f"{demo}/day1.ini").read().replace("file = day1", f"file = {demo}/day1")
    (tmp_path / "low.ini").write_text(text.replace("angle_deg = 70", "angle_deg = 63"))
    run = Run(measure_arguments(demo, str(tmp_path / "out"), instrument=str(tmp_path / "low.ini")))
    assert run.status == 0 and "not_reflected" in run.out


def test_saturated_dye_moves_with_the_shift(demo, tmp_path):
    """A wide image moved by whole pixels, and a bench that says so, is the same field: saturated dye stays where it is."""
    near = tifffile.imread(f"{demo}/day1_a_near.tif")
    wide = numpy.minimum(tifffile.imread(f"{demo}/day1_a_wide.tif"), 3000)
    text = open(f"{demo}/day1.ini").read().replace("file = day1_flat_near", f"file = {demo}/day1_flat_near")
    text = text.replace("\n[wide.flat]\nfile = day1_flat_wide.tif\n", "\n")
    text = text.replace("full_scale_adu = 65535", "full_scale_adu = 3000").replace("full_scale_adu = 3000", "full_scale_adu = 65535", 1)
    tables = []
    for name, dx in (("still", 0), ("moved", 12)):
        tifffile.imwrite(tmp_path / f"{name}.tif", numpy.roll(wide, dx, axis=1))
        (tmp_path / f"{name}.ini").write_text(text.replace("estimate = yes", f"estimate = no\ndx_px = {dx}"))
        tifffile.imwrite(tmp_path / "near.tif", near)
        run = Run(["measure", str(tmp_path / "near.tif"), str(tmp_path / f"{name}.tif"), "-i", str(tmp_path / f"{name}.ini"), "-a",
                   f"{demo}/assay.ini", "-o", str(tmp_path / name)])
        assert run.status == 0, run.err
        tables.append({(round(float(row["x_px"])), round(float(row["y_px"]))): row for row in rows(tmp_path / name / "cells.csv")
                       if 40 < float(row["x_px"]) < 440})
    shared = [place for place in tables[0] if place in tables[1]]
    assert len(shared) >= 4
    for place in shared:
        for column in ("contact_area_um2", "gap_median_nm"):
            a, b = tables[0][place][column], tables[1][place][column]
            assert a == b or abs(float(a) - float(b)) < 0.02 * abs(float(a)) + 0.05, (place, column, a, b)


def test_an_overexposed_field_is_not_just_empty(demo, tmp_path):
    near = tifffile.imread(f"{demo}/day1_a_near.tif")
    tifffile.imwrite(tmp_path / "white.tif", numpy.full(near.shape, 65535, numpy.uint16))
    run = Run(measure_arguments(demo, str(tmp_path / "out"), wide=str(tmp_path / "white.tif")))
    assert run.status == 0 and "empty:" in run.out and "saturated:" in run.out
