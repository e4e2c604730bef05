# SPDX-License-Identifier: GPL-3.0-or-later
"""Labels, references and masks: what is said of a gap, and what is left empty. Expectations are closed forms, or the
demo's truth."""
import csv
import math

import numpy
import pytest
import tifffile
from scipy import ndimage

from conftest import Run

WAVELENGTH, N1, N2, CELL, ANGLE = 488, 1.518, 1.337, 1.37, 70
GAP_COLUMNS = ("gap_median_nm", "gap_p05_nm", "gap_core_median_nm", "gap_random_nm", "gap_systematic_nm", "gap_limit_nm",
               "band_focal_um2", "unresolved_um2", "cleft_volume_um3", "above_reference_fraction",
               "attachment_fraction_low", "contact_area_high_um2")


def rows(path):
    with open(path, newline="") as file:
        return list(csv.DictReader(file))


@pytest.fixture
def bench(demo, tmp_path):
    """Writes an instrument file whose [reference] is `reference`, and an assay; measures; gives cells and field."""
    def measure(reference="", assay="", images=("near", "wide"), more=()):
        with open(f"{demo}/day1.ini") as file:
            text = file.read().split("[reference]")[0].replace("file = day1", f"file = {demo}/day1")
        (tmp_path / "bench.ini").write_text(text + "[reference]\n" + reference)
        (tmp_path / "assay.ini").write_text("[cells]\nmin_area_um2 = 20\n[output]\nmaps = yes\n" + assay)
        run = Run(["measure", *(f"{demo}/day1_a_{k}.tif" for k in images), "-i", str(tmp_path / "bench.ini"), "-a",
                   str(tmp_path / "assay.ini"), "-o", str(tmp_path / "out"), *more])
        if run.status:
            return run, None, None
        return run, rows(tmp_path / "out/cells.csv"), rows(tmp_path / "out/fields.csv")[0]
    return measure


# ---- references ----------------------------------------------------------------------------------------------


def test_film_reference_is_corrected_for_layers_and_for_the_medium_above(bench):
    # One layer of dye against two, and medium above a film where a cell stands above a gap: the same bench gives a film
    # of gap z the ratio R0 exp(-z / d) * 2 * I_medium / I_layered(0), s polarized (closed forms of two interfaces).
    cosine = math.cos(math.radians(ANGLE))
    i_medium = 4 * cosine ** 2 / (1 - (N2 / N1) ** 2)
    i_cell = 4 * cosine ** 2 / (1 - (CELL / N1) ** 2)
    depth = WAVELENGTH / (4 * math.pi * math.sqrt((N1 * math.sin(math.radians(ANGLE))) ** 2 - N2 ** 2))
    film = 1.5 * math.exp(-6 / depth) * 2 * i_medium / i_cell
    _, by_film, field = bench(f"kind = film\nratio = {film:.9f}\ngap_nm = 6\n")
    _, by_cell, other = bench("kind = cell\nratio = 1.5\ngap_nm = 0\n")
    assert float(field["reference_ratio"]) == pytest.approx(float(other["reference_ratio"]), rel=1e-5)
    assert float(by_film[0]["gap_median_nm"]) == pytest.approx(float(by_cell[0]["gap_median_nm"]), abs=0.01)
    assert {row["gap_kind"] for row in by_film} == {"absolute"}


def test_assumed_reference_is_relative_and_puts_the_closest_part_where_it_is_told(bench, tmp_path):
    run, cells, field = bench("from = cell\ngap_nm = 15\ngap_sd_nm = 4\n")
    assert "relative" in run.err
    assert {row["gap_kind"] for row in cells} == {"relative"}
    gap, labels = (tifffile.imread(tmp_path / f"out/{k}/day1_a_near.tif") for k in ("gap", "labels"))
    for row in cells:
        inside = gap[labels == int(row["cell"])]
        assert numpy.percentile(inside, 1) == pytest.approx(15, abs=8)  # the map is sharper than what is referred to
        assert float(row["gap_systematic_nm"]) > 4
    assert float(field["reference_ratio"]) > 0


def test_ratio_and_from_exclude_each_other_and_plates_are_for_plates(bench):
    run, _, _ = bench("from = cell\nratio = 1.5\ngap_nm = 15\n")
    assert run.status == 2 and "contradicts from" in run.err
    run, _, _ = bench("from = wells\ngap_nm = 15\n")
    assert run.status == 2 and "underfoot plate" in run.err
    run, _, _ = bench("gap_nm = 15\n")
    assert run.status == 2 and "from = cell" in run.err


# ---- labels --------------------------------------------------------------------------------------------------


def test_cytosol_needs_no_wide_light_for_its_gap(bench):
    # near alone: the wide image may be of any brightness; only its outlines matter
    _, cells, _ = bench("from = cell\ngap_nm = 15\n", "[cells]\nlabel = cytosol\n")
    assert len(cells) >= 7
    assert {row["gap_kind"] for row in cells} == {"relative"}
    assert all(row["gap_median_nm"] for row in cells)


def test_cytosol_with_a_measured_near_signal(bench):
    _, cells, field = bench("ratio = 9000\ngap_nm = 0\n", "[cells]\nlabel = cytosol\n")
    assert {row["gap_kind"] for row in cells} == {"relative"}
    assert float(field["reference_ratio"]) == pytest.approx(9000, rel=1e-6)


def test_adhesion_protein_has_no_gap_and_no_contact_without_a_threshold(bench):
    run, cells, field = bench("", "[cells]\nlabel = adhesion-protein\n")
    assert "no gap" in run.err and "near_threshold_adu" in run.err
    for row in cells:
        assert row["gap_kind"] == "none"
        assert not any(row[column] for column in GAP_COLUMNS)
        assert row["contact_area_um2"] == row["attachment_fraction"] == ""
        assert float(row["spread_area_um2"]) > 0
    assert field["reference_ratio"] == "" and field["contact_um2_per_mm2"] == ""
    assert sum(float(row["spot_count"]) for row in cells) > 50


def test_adhesion_protein_contact_is_where_near_is_bright(bench, demo, tmp_path):
    _, cells, _ = bench("", "[cells]\nlabel = adhesion-protein\n[contact]\nnear_threshold_adu = 3000\nmin_patch_um2 = 0\n")
    near = (tifffile.imread(f"{demo}/day1_a_near.tif").astype(float) - 100) / tifffile.imread(f"{demo}/day1_flat_near.tif")
    labels = tifffile.imread(tmp_path / "out/labels/day1_a_near.tif")
    bright = near - 250 >= 3000  # 250 counts of background, as the demo makes it
    for row in cells:
        inside = labels == int(row["cell"])
        assert float(row["contact_area_um2"]) == pytest.approx((bright & inside).sum() * 0.11 ** 2, rel=0.02, abs=0.1)
        assert row["attachment_fraction"] and row["attachment_fraction_low"] == ""


def test_one_image_is_enough_for_an_adhesion_protein_and_for_nothing_else(bench):
    _, cells, field = bench("", "[cells]\nlabel = adhesion-protein\n", images=("near",))
    assert len(cells) >= 7 and field["shift_dx_px"] == ""
    run, _, _ = bench("ratio = 1.5\n", images=("near",))
    assert run.status == 2 and "needs the wide image" in run.err


def test_labels_that_contradict_other_settings(bench):
    run, _, _ = bench("kind = film\nratio = 9000\n", "[cells]\nlabel = cytosol\n")
    assert run.status == 2 and "kind = film" in run.err


# ---- masks ---------------------------------------------------------------------------------------------------


def test_mask_takes_the_place_of_segmentation(bench, demo, tmp_path):
    _, cells, _ = bench("ratio = 1.5\n", more=("-m", f"{demo}/day1_a_truth_labels.tif"))
    given = tifffile.imread(f"{demo}/day1_a_truth_labels.tif")
    labels = tifffile.imread(tmp_path / "out/labels/day1_a_near.tif")
    assert ((given > 0) == (labels > 0)).all()
    assert len(cells) == given.max()
    areas = sorted(numpy.bincount(given.ravel())[1:] * 0.11 ** 2)
    assert sorted(float(row["spread_area_um2"]) for row in cells) == pytest.approx(areas, rel=1e-5)
    # numbered in the order of their first pixel
    firsts = [numpy.flatnonzero(labels.ravel() == k)[0] for k in range(1, labels.max() + 1)]
    assert firsts == sorted(firsts)


@pytest.mark.parametrize("spoil,word", [(lambda m: m + 0.5, "whole numbers"), (lambda m: -m, "whole numbers"),
                                        (lambda m: m[:100], "512")])
def test_masks_that_cannot_be_used(bench, demo, tmp_path, spoil, word):
    mask = spoil(tifffile.imread(f"{demo}/day1_a_truth_labels.tif").astype(numpy.float32))
    tifffile.imwrite(tmp_path / "mask.tif", mask)
    run, _, _ = bench("ratio = 1.5\n", more=("-m", str(tmp_path / "mask.tif")))
    assert run.status == 2 and word in run.err


# ---- nuclei --------------------------------------------------------------------------------------------------


def nuclei_image(places):
    """Discs of 2 um on background, with the demo's camera noise, moved like the demo's wide image (1.4, -0.8 px)."""
    y, x = numpy.mgrid[:512, :512]
    image = numpy.full((512, 512), 300.0)
    for row, column in places:
        image += 2500 / (1 + numpy.exp((numpy.hypot(y - row + 0.8, x - column - 1.4) - 18) / 1.5))
    dice = numpy.random.default_rng(8)
    return (dice.poisson(image * 2.17) / 2.17 + 100).astype(numpy.uint16)


@pytest.fixture
def truth(demo):
    """Label -> centre of what lies deepest inside the true cell."""
    labels = tifffile.imread(f"{demo}/day1_a_truth_labels.tif")
    centres = {}
    for k in range(1, labels.max() + 1):
        depth = ndimage.distance_transform_edt(labels == k)
        centres[k] = numpy.unravel_index(depth.argmax(), depth.shape)
    return labels, centres


def test_one_nucleus_a_cell(bench, truth, tmp_path):
    labels, centres = truth
    tifffile.imwrite(tmp_path / "n.tif", nuclei_image(centres.values()))
    _, cells, _ = bench("ratio = 1.5\n", more=("--nuclei", str(tmp_path / "n.tif")))
    found = tifffile.imread(tmp_path / "out/labels/day1_a_near.tif")
    assert len(cells) == len(centres)
    assert len({found[centre] for centre in centres.values()} - {0}) == len(centres)


def test_nuclei_split_what_shape_would_not_and_join_what_it_would_part(bench, truth, tmp_path):
    labels, centres = truth
    alone = next(k for k in centres if not set(labels[ndimage.binary_dilation(labels == k, iterations=12)]) - {0, k})
    rows_of, columns_of = numpy.nonzero(labels == alone)
    middle = (rows_of.mean(), columns_of.mean())
    depth = ndimage.distance_transform_edt(labels == alone)
    good = [(r, c) for r, c in zip(rows_of, columns_of) if depth[r, c] > 21]
    pair = [min(good, key=lambda p: p[1]), max(good, key=lambda p: p[1])]
    if numpy.hypot(pair[0][0] - pair[1][0], pair[0][1] - pair[1][1]) < 45:
        pair = [min(good), max(good)]
    others = [centre for k, centre in centres.items() if k != alone]
    tifffile.imwrite(tmp_path / "n.tif", nuclei_image(others + pair))
    _, cells, _ = bench("ratio = 1.5\n", more=("--nuclei", str(tmp_path / "n.tif")))
    assert len(cells) == len(centres) + 1, middle
    # no nuclei at all: every piece is one cell
    tifffile.imwrite(tmp_path / "n.tif", nuclei_image([]))
    _, cells, _ = bench("ratio = 1.5\n", more=("--nuclei", str(tmp_path / "n.tif")))
    found = tifffile.imread(tmp_path / "out/labels/day1_a_near.tif")
    assert len(cells) == ndimage.label(found > 0)[1]
