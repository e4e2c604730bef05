# SPDX-License-Identifier: GPL-3.0-or-later
"""Sheets, layouts, lists, positions and OME-XML with bytes changed at random: an answer every time, never a crash. Run with
the address and undefined-behaviour sanitizers where that build is there."""
import os
import random

import numpy
import pytest
import tifffile

from conftest import PROGRAM, ROOT, Run

ASAN = os.path.join(ROOT, "build/asan/underfoot")
WHICH = ASAN if os.path.exists(ASAN) else PROGRAM

SHEET = ("near,wide,plate,well,field,vessel,treatment,dose,dose_unit,role,near_page,time_min,acquired,instrument,extra\n"
         "a_near.tif,a_wide.tif,p1,A01,1,96,vehicle,0,uM,control,1,0,2030-05-06T09:00:00,a.ini,x\n"
         "b_near.tif,sub\\b_wide.tif,p1,AF48,2,1536,thrift,\"0,3 \u00b5M\",,sample,2,1e3,2030-05-06 09:00,,\"a \"\"b\"\"\"\n")
BLOCKS = "plate,p1\ntreatment,1,2,3\nA,x,y,\nB,\"a,b\",,z\n\ndose (uM),1,2,3\nA,1,\"0,3\",\nB,,,3 nM\n"
LIST = "plate,well,treatment,dose\np1,A01,x,1 uM\np1,B02,y,\n"
OME = ('<?xml version="1.0" encoding="UTF-8"?><OME xmlns="x"><Plate Name="p"><Well Row="1" Column="2"><WellSample><ImageRef ID="Image:0"/>'
       '</WellSample></Well></Plate><Image ID="Image:0" Name="n"><AcquisitionDate>2030-05-06T09:00:00</AcquisitionDate>'
       '<Pixels DimensionOrder="XYCZT" SizeX="20" SizeY="16" SizeC="2" SizeZ="1" SizeT="2" PhysicalSizeX="0.16" PhysicalSizeXUnit="\u00b5m" '
       'TimeIncrement="3" TimeIncrementUnit="min"><Channel Name="near" SamplesPerPixel="1"/><Channel Name="wide"/><TiffData IFD="0" PlaneCount="4" '
       'FirstC="0"><UUID FileName="A01.tif">u</UUID></TiffData><Plane TheT="1" TheC="0" TheZ="0" DeltaT="4"/></Pixels></Image></OME>')


def changed(data, rng):
    """A few bytes replaced, dropped, doubled, or cut off."""
    data = bytearray(data)
    for _ in range(rng.randint(1, 6)):
        at = rng.randrange(len(data)) if data else 0
        kind = rng.randrange(5)
        if kind == 0 and data:
            data[at] = rng.choice(b'\x00\n\r\t",;\\/{}#=-+.eE0159AZaz\xb5\xff<>&')
        elif kind == 1 and data:
            del data[at:at + rng.randint(1, 20)]
        elif kind == 2:
            data[at:at] = data[at:at + rng.randint(1, 40)]
        elif kind == 3:
            data[at:at] = rng.choice([b"99999999999", b"-1", b"NaN", b'"', b"\xef\xbb\xbf", b"\n\n", b",,,,", b"A" * 300])
        elif rng.random() < 0.2:
            del data[at:]
    return bytes(data)


def answers(arguments, cwd):
    run = Run(arguments, program=WHICH, cwd=str(cwd), env={"ASAN_OPTIONS": "detect_leaks=1"})
    assert run.status in (0, 2), (run.status, run.err[-2000:])
    assert "Sanitizer" not in run.err and "runtime error" not in run.err, run.err[-2000:]
    return run


@pytest.mark.parametrize("seed", range(40))
def test_sheets(tmp_path, seed):
    rng = random.Random(seed)
    (tmp_path / "s.csv").write_bytes(changed(SHEET.encode(rng.choice(["utf-8", "latin-1"])), rng))
    answers(["sheet", "check", "s.csv", "--reference", "pooled"], tmp_path)


@pytest.mark.parametrize("seed", range(25))
def test_layouts(tmp_path, seed):
    rng = random.Random(1000 + seed)
    for well in ("A1", "B2"):
        for channel in ("near", "wide"):
            (tmp_path / f"p1_{well}_7_{channel}.tif").touch()
    (tmp_path / "l.csv").write_bytes(changed(rng.choice([BLOCKS, LIST]).encode(), rng))
    (tmp_path / "q.csv").write_bytes(changed(rng.choice([b"position,well,field\n7,A01,1\n", b"position,x_um,y_um\n7,0,0\n8,99000,1\n"]), rng))
    base = ["-o", "out.csv", "--near-channel", "near", "--wide-channel", "wide", "--layout", "l.csv"]
    answers(["sheet", "build", ".", "--name", "{plate}_{well}_{field}_{channel}.tif", *base], tmp_path)
    answers(["sheet", "build", ".", "--name", "{plate}_{*}_{position}_{channel}.tif", *base, "--positions", "q.csv", "--a1", "0,0",
             "--vessel", "96"], tmp_path)
    answers(["sheet", "build", "--expect", "--name", "{plate}_{well}_{channel}.tif", *base, "--fields-per-well", "3"], tmp_path)


@pytest.mark.parametrize("seed", range(20))
def test_lists_of_treatments(tmp_path, seed):
    rng = random.Random(2000 + seed)
    (tmp_path / "t.csv").write_bytes(changed(b"treatment,dose,dose_unit,role,wells\nvehicle,,,control,6\nthrift,1 uM,,,3\nx,3,nM,sample,2\n", rng))
    answers(["sheet", "layout", "t.csv", "-o", "out.csv", "--seed", str(seed)], tmp_path)


@pytest.mark.parametrize("seed", range(40))
def test_ome_xml(tmp_path, seed):
    rng = random.Random(3000 + seed)
    xml = changed(OME.encode(), rng).replace(b"\x00", b" ")
    tifffile.imwrite(tmp_path / "A01.tif", numpy.zeros((4, 16, 20), numpy.uint16), description=xml, metadata=None, photometric="minisblack")
    answers(["sheet", "build", ".", "-o", "out.csv", "--name", "{well}.tif", "--near-channel", "near", "--wide-channel", "wide"], tmp_path)


@pytest.mark.parametrize("seed", range(20))
def test_templates(tmp_path, seed):
    rng = random.Random(4000 + seed)
    (tmp_path / "p1_A01_near.tif").touch()
    (tmp_path / "p1_A01_wide.tif").touch()
    name = changed(b"{plate}_{well}_{channel}.tif", rng).replace(b"\x00", b"{").decode("latin-1")
    answers(["sheet", "build", ".", "-o", "out.csv", f"--name={name}", "--near-channel", "near", "--wide-channel", "wide"], tmp_path)


def test_the_unchanged_ome_is_read(tmp_path):
    tifffile.imwrite(tmp_path / "A01.tif", numpy.zeros((4, 16, 20), numpy.uint16), description=OME.encode(), metadata=None,
                     photometric="minisblack")
    run = answers(["sheet", "build", ".", "-o", "out.csv", "--name", "{*}.tif", "--near-channel", "near", "--wide-channel", "wide"], tmp_path)
    rows = open(tmp_path / "out.csv").read().split("\n")
    assert run.status == 0 and rows[0] == "near,wide,plate,well,field,time_min,acquired,near_page,wide_page"
    # only the second time point has a time of its own, 4 s
    assert rows[1] == "A01.tif,A01.tif,p,B03,1,0,2030-05-06T09:00:00,1,2"
    assert rows[2] == "A01.tif,A01.tif,p,B03,1,0.0666667,2030-05-06T09:00:00,3,4"
