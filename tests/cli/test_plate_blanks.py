# SPDX-License-Identifier: GPL-3.0-or-later
"""Blank wells define the background of their plate: counts of a simulated empty field come back, in every field's row."""
import csv

import numpy
import tifffile

from conftest import Run

NEAR_ADU, WIDE_ADU, OFFSET, GAIN = 251.3, 498.6, 100, 2.17


def table(path):
    with open(path, newline="") as file:
        return list(csv.DictReader(file))


def blank(demo, channel, level, rng):
    """Poisson light of one level under the demo's own flat field."""
    flat = tifffile.imread(f"{demo}/day1_flat_{channel}.tif")
    electrons = rng.poisson(level * flat * GAIN) + rng.normal(0, 1.6, flat.shape)
    return numpy.clip(numpy.rint(OFFSET + electrons / GAIN), 0, 65535).astype(numpy.uint16)


def test_blank_wells_define_the_background(demo, tmp_path):
    rng = numpy.random.default_rng(8)
    rows = [f"{demo}/day1_{f}_near.tif,{demo}/day1_{f}_wide.tif,P,A{k},{demo}/day1.ini,sample"
            for k, f in enumerate("ab", 1)]
    for k in (1, 2):
        for channel, level in (("near", NEAR_ADU), ("wide", WIDE_ADU)):
            tifffile.imwrite(tmp_path / f"blank{k}_{channel}.tif", blank(demo, channel, level, rng))
        rows.append(f"blank{k}_near.tif,blank{k}_wide.tif,P,H{k},{demo}/day1.ini,blank")
    sheet = tmp_path / "sheet.csv"
    sheet.write_text("\n".join(["near,wide,plate,well,instrument,role", *rows]) + "\n")
    run = Run(["plate", str(sheet), "-a", f"{demo}/assay.ini", "-o", str(tmp_path / "out"), "-q"])
    assert run.status == 0, run.err
    fields = table(tmp_path / "out" / "fields.csv")
    for row in fields[:2]:
        assert abs(float(row["near_background_adu"]) - NEAR_ADU) < 0.5
        assert abs(float(row["wide_background_adu"]) - WIDE_ADU) < 0.5
    assert fields[0]["near_background_adu"] == fields[1]["near_background_adu"]
    assert [row["state"] for row in table(tmp_path / "out" / "wells.csv")] == ["ok", "ok", "empty", "empty"]
    again = Run(["plate", str(sheet), "-a", f"{demo}/assay.ini", "-o", str(tmp_path / "out"), "--json"])
    assert '"measured": 0' in again.out
