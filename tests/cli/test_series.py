"""A series of angles from pages to table, on fields made here: a cell of two gaps under a layered field."""
import csv

import numpy
import pytest
import tifffile

from conftest import Run, tree

ANGLES = [69, 71, 73, 75, 77]
NEAR_GAP, FAR_GAP = 30.0, 95.0
INSTRUMENT = """[light]
wavelength_nm = 488
polarization = s
[interface]
substrate_n = 1.518
medium_n = 1.337
cell_n_sd = 0.01
angle_sd_deg = 0.1
[decay]
model = layered
[pixel]
size_um = 0.1
[near.camera]
offset_adu = 100
gain_e_per_adu = 2
[wide.camera]
offset_adu = 100
gain_e_per_adu = 2
[shift]
estimate = no
"""


def layered(angle_deg, gap_nm):
    """|E|^2 at the cell of substrate | medium | cell, s polarized, from the four boundary conditions solved as they are."""
    k0 = 2 * numpy.pi / 488
    kx = k0 * 1.518 * numpy.sin(numpy.radians(angle_deg))
    a, b, c = (numpy.sqrt(complex((k0 * n) ** 2 - kx ** 2)) for n in (1.518, 1.337, 1.37))
    f = numpy.exp(1j * b * gap_nm)
    # unknown: reflected, two waves in the medium, transmitted; E and dE/dz continuous at both interfaces
    matrix = [[-1, 1, 1, 0], [a, b, -b, 0], [0, f, 1 / f, -1], [0, b * f, -b / f, -c]]
    return abs(numpy.linalg.solve(matrix, [1, a, 0, 0])[3]) ** 2


def make(folder, angles=ANGLES, amplitude=3000.0, series=None, power=None, change=None):
    """near.tif (a page an angle), wide.tif and instrument.ini; the true gap where there is a cell."""
    rng = numpy.random.default_rng(4)
    y, x = numpy.mgrid[0:240, 0:260]
    r = numpy.hypot(y - 118, x - 131)
    cell, inner = r < 85, r < 55
    gap = numpy.where(inner, NEAR_GAP, FAR_GAP)

    def camera(light):
        return (100 + rng.poisson(light * 2) / 2).round().astype(numpy.uint16)

    pages = []
    for k, angle in enumerate(angles):
        field = numpy.where(inner, layered(angle, NEAR_GAP), layered(angle, FAR_GAP))
        pages.append(camera(150 + (power[k] if power else 1) * amplitude * cell * field))
    pages = numpy.stack(pages)
    if change:
        pages = change(pages)
    tifffile.imwrite(folder / "near.tif", pages, photometric="minisblack")
    tifffile.imwrite(folder / "wide.tif", camera(200 + 4000.0 * cell))
    text = INSTRUMENT + "[series]\nangles_deg = " + ", ".join(map(str, series or angles)) + "\n"
    (folder / "instrument.ini").write_text(text + ("power = " + ", ".join(map(str, power)) + "\n" if power else ""))
    (folder / "assay.ini").write_text("[output]\nmaps = yes\noverlay = no\n")
    return gap, cell, inner


def measure(folder, out="out", *more):
    return Run(["measure", folder / "near.tif", folder / "wide.tif", "-i", folder / "instrument.ini", "-a",
                folder / "assay.ini", "-o", folder / out, *more])


def first_row(path):
    with open(path, newline="") as file:
        return next(csv.DictReader(file))


def test_gaps_without_a_reference(tmp_path):
    gap, cell, inner = make(tmp_path)
    run = measure(tmp_path)
    assert run.status == 0, run.err
    found = tifffile.imread(tmp_path / "out/gap/near.tif")
    deep = inner & (numpy.hypot(*(numpy.mgrid[0:240, 0:260] - numpy.array([118, 131])[:, None, None])) < 50)
    ring = cell & ~inner & (numpy.hypot(*(numpy.mgrid[0:240, 0:260] - numpy.array([118, 131])[:, None, None])) > 60)
    assert numpy.median(found[deep]) == pytest.approx(NEAR_GAP, abs=0.5)
    assert numpy.nanmedian(found[ring]) == pytest.approx(FAR_GAP, abs=0.5)
    row, field = first_row(tmp_path / "out/cells.csv"), first_row(tmp_path / "out/fields.csv")
    assert row["gap_kind"] == "absolute"
    assert float(row["contact_area_um2"]) == pytest.approx(inner.sum() * 0.01, rel=0.02)
    assert 1 < float(row["gap_systematic_nm"]) < 15
    assert field["reference_ratio"] == "" and field["flags"] == ""
    assert 0.5 < float(field["series_chi_square"]) < 1.1


def test_same_bytes_with_any_number_of_threads(tmp_path):
    make(tmp_path)
    for threads in ("1", "3"):
        assert measure(tmp_path, "out" + threads, "-t", threads).status == 0
    one, three = tree(tmp_path / "out1"), tree(tmp_path / "out3")
    assert set(one) == set(three)
    for name in one:
        assert name == "run.json" or one[name] == three[name], name


def test_power_and_order_are_the_pages_own(tmp_path):
    gap, cell, inner = make(tmp_path, angles=[75, 69, 77, 71, 73], power=[2, 1, 2.5, 1, 1.5])
    assert measure(tmp_path).status == 0
    found = tifffile.imread(tmp_path / "out/gap/near.tif")
    assert numpy.nanmedian(found[inner]) == pytest.approx(NEAR_GAP, abs=1)


def test_a_page_that_bleached_is_a_misfit(tmp_path):
    make(tmp_path, change=lambda p: numpy.stack([*p[:2], (250 + (p[2] - 250.0) * 0.85).round().astype(p.dtype), *p[3:]]))
    run = measure(tmp_path)
    assert run.status == 0
    assert "series_misfit" in first_row(tmp_path / "out/fields.csv")["flags"]
    assert "do not obey" in run.err


def test_pages_and_angles_must_agree(tmp_path):
    make(tmp_path, series=[69, 71, 73])
    run = measure(tmp_path)
    assert run.status == 2
    assert "near.tif: has 5 pages, but [series] angles_deg has 3 angles" in run.err


def test_an_angle_that_is_not_reflected_is_named(tmp_path):
    make(tmp_path, series=[69, 71, 64.4, 75, 77])
    run = measure(tmp_path)
    assert run.status == 2
    # asin(1.37 / 1.518) = 64.489 deg
    assert "64.4 deg, the angle of page 3" in run.err and "64.49 deg" in run.err


def test_too_little_light_is_unresolved(tmp_path):
    make(tmp_path, amplitude=1.0)
    assert measure(tmp_path).status == 0
    row = first_row(tmp_path / "out/cells.csv")
    assert "too_dim" in row["flags"] and row["contact_area_um2"] == "" and row["gap_median_nm"] == ""
