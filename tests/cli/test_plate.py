# SPDX-License-Identifier: GPL-3.0-or-later
"""`underfoot plate` and `merge`: however a run is cut, killed or spread, it ends in the bytes of one undisturbed run."""
import csv
import json
import os
import re
import shutil
import signal
import subprocess
import time

import numpy
import pytest
import tifffile

from conftest import PROGRAM, ROOT, Run, tree

SIDE, FIELDS = 160, 24


def table(path):
    with open(path, newline="") as file:
        return list(csv.DictReader(file))


def write_sheet(folder, rows, name="sheet.csv", columns="near,wide,plate,well,treatment,role,replicate"):
    (folder / name).write_text("\n".join([columns, *rows]) + "\n")
    return str(folder / name)


@pytest.fixture(scope="module")
def plate(demo, tmp_path_factory):
    """Crops of the demo's fields as a plate of 24 wells; two controls a row."""
    folder = tmp_path_factory.mktemp("plate")
    text = re.sub(r"\n\[(near|wide)\.flat\]\nfile = .*\n", "\n", open(f"{demo}/day1.ini").read())
    (folder / "bench.ini").write_text(text)
    (folder / "assay.ini").write_text("[cells]\nmin_area_um2 = 5\nedge_cells = keep\n[output]\noverlay = flagged\n")
    rows = []
    for k in range(FIELDS):
        y, x = (k // 4 % 3) * SIDE, (k % 3) * SIDE
        for channel in ("near", "wide"):
            image = tifffile.imread(f"{demo}/day1_{'abcd'[k % 4]}_{channel}.tif")
            tifffile.imwrite(folder / f"f{k}_{channel}.tif", image[y:y + SIDE, x:x + SIDE])
        well = f"{'ABCD'[k // 6]}{k % 6 + 1}"
        role = "control" if k % 6 < 2 else "sample"
        rows.append(f"f{k}_near.tif,f{k}_wide.tif,P,{well},{'vehicle' if role == 'control' else 'samphire'},{role},{k // 12 + 1}")
    write_sheet(folder, rows)
    return folder


def arguments(plate, out, *more, sheet="sheet.csv", command="plate"):
    return [command, str(plate / sheet), "-i", str(plate / "bench.ini"), "-a", str(plate / "assay.ini"), "-o", str(out), *more]


def contents(out):
    """Every file whose bytes must not depend on how the run went."""
    files = {name: data for name, data in tree(str(out)).items()
             if not name.startswith((".lock", "log/")) and not name.endswith(".part")}
    story = json.loads(files.pop("run.json"))
    del story["varies_between_runs"]
    files["run.json"] = json.dumps(story).encode()
    return files


def assert_same(a, b):
    assert sorted(a) == sorted(b)
    assert [name for name in a if a[name] != b[name]] == []


@pytest.fixture(scope="module")
def undisturbed(plate, tmp_path_factory):
    out = tmp_path_factory.mktemp("undisturbed") / "out"
    run = Run(arguments(plate, out, "--threads", "1"))
    assert run.status == 0, run.err
    return contents(out)


@pytest.mark.parametrize("threads", ["2", "7"])
def test_threads_do_not_matter(plate, undisturbed, tmp_path, threads):
    assert Run(arguments(plate, tmp_path, "--threads", threads, "-q")).status == 0
    assert_same(undisturbed, contents(tmp_path))


def test_killed_again_and_again(plate, undisturbed, tmp_path):
    rng = numpy.random.default_rng(3)
    for _ in range(8):
        process = subprocess.Popen([PROGRAM, *arguments(plate, tmp_path, "-q", "--threads", "2")])
        time.sleep(float(rng.uniform(0.01, 0.9)))
        process.send_signal(signal.SIGKILL)
        process.wait()
    assert Run(arguments(plate, tmp_path, "-q")).status == 0
    assert_same(undisturbed, contents(tmp_path))


def test_stopped_by_the_user(plate, undisturbed, tmp_path):
    process = subprocess.Popen([PROGRAM, *arguments(plate, tmp_path, "-q", "--threads", "1")], stderr=subprocess.PIPE, text=True)
    while not os.path.isdir(tmp_path / "records") and process.poll() is None:
        time.sleep(0.005)
    process.send_signal(signal.SIGINT)
    error = process.stderr.read()
    assert process.wait() in (0, 130)
    if process.returncode == 130:
        assert "the same command goes on" in error
        assert not os.path.exists(tmp_path / "run.json")
    run = Run(arguments(plate, tmp_path, "--json"))
    assert run.status == 0
    assert_same(undisturbed, contents(tmp_path))


@pytest.mark.parametrize("shards", [1, 5])
def test_shards_in_one_folder(plate, undisturbed, tmp_path, shards):
    assert Run(arguments(plate, tmp_path, "--prepare")).status == 0
    for k in range(shards, 0, -1):
        assert Run(arguments(plate, tmp_path, "-q", "--shard", f"{k}/{shards}")).status == 0
    run = merge(plate, tmp_path)
    assert run.status == 0, run.err
    assert_same(undisturbed, contents(tmp_path))


def merge(plate, out, *parts):
    return Run(["merge", str(out), *map(str, parts), "--sheet", str(plate / "sheet.csv"), "-i", str(plate / "bench.ini"), "-a",
                str(plate / "assay.ini")])


def test_shards_elsewhere_missing_and_doubled_ones(plate, undisturbed, tmp_path):
    main, parts = tmp_path / "main", [tmp_path / "p1", tmp_path / "p2"]
    assert Run(arguments(plate, main, "--prepare")).status == 0
    for k, part in enumerate(parts, 1):
        shutil.copytree(main, part)
        assert Run(arguments(plate, part, "-q", "--shard", f"{k}/2")).status == 0
    missing = merge(plate, main, parts[0])
    assert missing.status == 2 and "12 of 24 fields are missing" in missing.err and "P/A02" in missing.err
    assert merge(plate, main, *parts).status == 0
    assert_same(undisturbed, contents(main))


def test_batch_script(plate, undisturbed, tmp_path):
    done = subprocess.run([f"{ROOT}/batch/run-shards", "3", "2", str(plate / "sheet.csv"), str(tmp_path), "-i",
                           str(plate / "bench.ini"), "-a", str(plate / "assay.ini")], capture_output=True, text=True,
                          env=dict(os.environ, UNDERFOOT=PROGRAM))
    assert done.returncode == 0, done.stderr
    assert_same(undisturbed, contents(tmp_path))


def test_a_shard_needs_its_plan(plate, tmp_path):
    run = Run(arguments(plate, tmp_path, "--shard", "1/2"))
    assert run.status == 2 and "--prepare" in run.err
    for wrong in ("3/2", "0/2", "1", "x/y"):
        assert "like 2/5" in Run(arguments(plate, tmp_path, "--shard", wrong)).err


def test_a_second_run_is_refused_naming_the_first(plate, tmp_path):
    assert Run(arguments(plate, tmp_path, "--prepare")).status == 0
    import fcntl
    with open(tmp_path / ".lock", "r+") as lock:
        lock.truncate(0)
        lock.write("process 1 on elsewhere since today\n")
        lock.flush()
        fcntl.lockf(lock, fcntl.LOCK_EX)
        run = Run(arguments(plate, tmp_path))
    assert run.status == 3 and "process 1 on elsewhere" in run.err


def copy_of(plate, tmp_path):
    folder = tmp_path / "plate"
    shutil.copytree(plate, folder)
    return folder


def test_a_bad_file_costs_its_field_and_is_tried_again_when_mended(plate, tmp_path):
    folder, out = copy_of(plate, tmp_path), tmp_path / "out"
    whole = (folder / "f3_near.tif").read_bytes()
    (folder / "f3_near.tif").write_bytes(whole[:len(whole) // 2])
    os.remove(folder / "f5_wide.tif")
    run = Run(arguments(folder, out))
    assert run.status == 1 and "2 failed" in run.out and "f3_near.tif" in run.out
    rows = table(out / "fields.csv")
    bad = [row for row in rows if row["status"] == "failed"]
    assert [row["well"] for row in bad] == ["A04", "A06"]
    assert all(row["reason"] and row["cells"] == "" and row["near_background_adu"] == "" for row in bad)
    assert {row["well"]: row["state"] for row in table(out / "wells.csv")}["A04"] == "failed"
    assert {row["well"]: row["state"] for row in table(out / "wells.csv")}["A06"] == "not_imaged"
    again = json.loads(Run(arguments(folder, out, "--json")).out)
    assert again["measured"] == 0 and again["failed"] == 2
    (folder / "f3_near.tif").write_bytes(whole)
    shutil.copy(plate / "f5_wide.tif", folder / "f5_wide.tif")
    mended = json.loads(Run(arguments(folder, out, "--json")).out)
    assert mended["measured"] == 2 and mended["failed"] == 0


def test_changed_settings_and_inputs_are_noticed(plate, tmp_path):
    folder, out = copy_of(plate, tmp_path), tmp_path / "out"
    assert Run(arguments(folder, out, "-q")).status == 0
    tifffile.imwrite(folder / "f7_near.tif", tifffile.imread(folder / "f7_near.tif") + 1)
    assert json.loads(Run(arguments(folder, out, "--json")).out)["measured"] == 1
    before = table(out / "cells.csv")
    (folder / "assay.ini").write_text("[cells]\nmin_area_um2 = 5\n[contact]\ncutoff_nm = 80\nclose_nm = 80\n")
    assert json.loads(Run(arguments(folder, out, "--json")).out)["measured"] == FIELDS
    assert table(out / "cells.csv") != before
    assert json.loads(Run(arguments(folder, out, "--json", "--fresh")).out)["measured"] == FIELDS


def test_spoilt_records_are_measured_again(plate, undisturbed, tmp_path):
    assert Run(arguments(plate, tmp_path, "-q")).status == 0
    names = sorted(os.listdir(tmp_path / "records"))
    (tmp_path / "records" / names[0]).write_bytes(b"")
    data = bytearray((tmp_path / "records" / names[1]).read_bytes())
    data[len(data) // 2] ^= 1
    (tmp_path / "records" / names[1]).write_bytes(data)
    (tmp_path / "plan.json").write_text("{")
    run = json.loads(Run(arguments(plate, tmp_path, "--json")).out)
    assert run["measured"] == 2
    assert_same(undisturbed, contents(tmp_path))


def with_reference(folder, text):
    bench = (folder / "bench.ini").read_text()
    (folder / "bench.ini").write_text(re.sub(r"\[reference\].*", f"[reference]\n{text}\n", bench, flags=re.S))


def test_reference_of_wells_and_pooled(plate, tmp_path):
    folder = copy_of(plate, tmp_path)
    with_reference(folder, "from = wells\ngap_nm = 12")
    run = Run(arguments(folder, tmp_path / "wells"))
    assert run.status == 0 and "from 8 wells" in run.out, run.err
    row = table(tmp_path / "wells" / "reference.csv")[0]
    assert row["from"] == "wells" and row["wells"] == "8" and row["worst_well"]
    assert {cell["gap_kind"] for cell in table(tmp_path / "wells" / "cells.csv")} == {"relative"}
    excluded = tmp_path / "exclusions.csv"
    excluded.write_text("field_id,x_um,reason\nP/A01,,focus\nP/A02,3.5,one cell\n")
    run = Run(arguments(folder, tmp_path / "excluded", "--exclude", str(excluded)))
    assert "from 7 wells" in run.out and run.status == 0
    with_reference(folder, "from = pooled\ngap_nm = 12")
    run = Run(arguments(folder, tmp_path / "pooled"))
    assert run.status == 0 and "from 24 wells" in run.out
    rows = [line for line in (folder / "sheet.csv").read_text().split("\n") if "vehicle" not in line]
    (folder / "one.csv").write_text("\n".join(rows))
    run = Run(arguments(folder, tmp_path / "one", sheet="one.csv"))
    assert run.status == 2 and "one treatment and coating" in run.err
    with_reference(folder, "from = wells\ngap_nm = 12")
    run = Run(arguments(folder, tmp_path / "none", sheet="one.csv"))
    assert run.status == 2 and "no field tells its reference" in run.err


def test_replicates_are_means_of_wells(plate, tmp_path):
    (tmp_path / "few.ini").write_text("[compare]\nmin_cells_per_well = 1\n")
    assert Run(arguments(plate, tmp_path / "out", "-q", "-a", str(tmp_path / "few.ini"))).status == 0
    wells, replicates = table(tmp_path / "out" / "wells.csv"), table(tmp_path / "out" / "replicates.csv")
    assert len(wells) == FIELDS and len(replicates) == 4
    for row in replicates:
        mine = [float(w["spread_area_um2_mean"]) for w in wells if w["treatment"] == row["treatment"]
                and w["replicate"] == row["replicate"] and w["spread_area_um2_mean"]]
        assert float(row["spread_area_um2"]) == pytest.approx(numpy.mean(mine), rel=1e-4)


def test_follow_measures_what_comes(plate, undisturbed, tmp_path):
    folder, out = copy_of(plate, tmp_path), tmp_path / "out"
    late = [folder / f"f{k}_{c}.tif" for k in range(12, FIELDS) for c in ("near", "wide")]
    for path in late:
        os.remove(path)
    process = subprocess.Popen([PROGRAM, *arguments(folder, out, "-q", "--follow")])
    time.sleep(0.5)
    for path in late:
        shutil.copy(plate / path.name, path)
    assert process.wait(timeout=120) == 0
    mine = table(out / "cells.csv")
    assert [row["gap_median_nm"] for row in mine] == [
        row["gap_median_nm"] for row in csv.DictReader(undisturbed["cells.csv"].decode().splitlines())]


def test_a_disk_that_is_full(plate, undisturbed, tmp_path):
    """A limit on the size of files stands for a full disk; what is written stays whole, and the same command goes on."""
    limited = subprocess.run(["bash", "-c", 'ulimit -f 3; exec "$@"', "limit", PROGRAM, *arguments(plate, tmp_path, "-q")],
                             capture_output=True, text=True)
    assert limited.returncode == 3 and "cannot be written" in limited.stderr
    assert Run(arguments(plate, tmp_path, "-q")).status == 0
    assert_same(undisturbed, contents(tmp_path))


def test_faults_of_the_sheet_and_of_the_command(plate, tmp_path):
    bad = write_sheet(tmp_path, ["a.tif,b.tif,P,Z99,x,sample,1"])
    run = Run(["plate", bad, "-i", str(plate / "bench.ini"), "-o", str(tmp_path / "out")])
    assert run.status == 2 and "Z99" in run.err and not os.path.exists(tmp_path / "out")
    assert "plate needs a sheet" in Run(["plate"]).err
    assert "-o OUT" in Run(["plate", bad]).err
    assert "--sheet" in Run(["merge", str(tmp_path)]).err
    assert "exclude each other" in Run(arguments(plate, tmp_path, "--prepare", "--shard", "1/2")).err
