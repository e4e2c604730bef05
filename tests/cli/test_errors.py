"""Every documented error once: exit status, one clear line that names the mend, and nothing half-written."""
import os
import re
import subprocess

import numpy
import pytest
import tifffile

from conftest import PROGRAM, ROOT, Run, measure_arguments, tree


def refused(run, status, *words):
    assert run.status == status, run.err
    lines = run.err.strip().split("\n")
    assert len(lines) == 1, run.err
    assert lines[0].startswith("underfoot: ")
    for word in words:
        assert word in lines[0], lines[0]
    assert run.out == ""


def nothing_written(folder):
    assert not os.path.exists(folder) or tree(folder) == {}


@pytest.fixture
def instrument(demo, tmp_path):
    """Writes the demo's instrument file with changes: (pattern, replacement) pairs."""
    def write(*changes, more=""):
        with open(f"{demo}/day1.ini") as file:
            text = file.read().replace("file = day1_flat", f"file = {demo}/day1_flat")
        for pattern, replacement in changes:
            text, count = re.subn(pattern, replacement, text)
            assert count, pattern
        path = tmp_path / "instrument.ini"
        path.write_text(text + more)
        return path
    return write


# ---- images -------------------------------------------------------------------------------------------------


def with_image(demo, tmp_path, image, **keywords):
    tifffile.imwrite(tmp_path / "image.tif", image, **keywords)
    run = Run(measure_arguments(demo, tmp_path / "out", near=tmp_path / "image.tif"))
    nothing_written(tmp_path / "out")
    return run


def test_truncated_tiff(demo, tmp_path):
    with open(f"{demo}/day1_a_near.tif", "rb") as file:
        (tmp_path / "cut.tif").write_bytes(file.read()[:200000])
    run = Run(measure_arguments(demo, tmp_path / "out", near=tmp_path / "cut.tif"))
    refused(run, 2, "cut.tif")
    nothing_written(tmp_path / "out")


def test_colour_tiff(demo, tmp_path):
    run = with_image(demo, tmp_path, numpy.zeros((512, 512, 3), numpy.uint8), photometric="rgb")
    refused(run, 2, "image.tif", "colour")


def test_two_sizes(demo, tmp_path):
    run = with_image(demo, tmp_path, numpy.zeros((512, 511), numpy.uint16))
    refused(run, 2, "511 x 512")
    (tmp_path / "plain.ini").write_text("[near.flat]\n")
    tifffile.imwrite(tmp_path / "wide.tif", numpy.zeros((100, 90), numpy.uint16))
    with open(f"{demo}/day1.ini") as file:
        (tmp_path / "i.ini").write_text(re.sub(r"\n\[(near|wide)\.flat\]\nfile = .*\n", "\n", file.read()))
    run = Run(measure_arguments(demo, tmp_path / "out", wide=tmp_path / "wide.tif", instrument=tmp_path / "i.ini"))
    refused(run, 2, "512 x 512", "90 x 100", "same size")
    nothing_written(tmp_path / "out")


def test_several_pages(demo, tmp_path):
    run = with_image(demo, tmp_path, numpy.zeros((3, 512, 512), numpy.uint16), photometric="minisblack")
    refused(run, 2, "3 pages")


@pytest.mark.parametrize("kind", ["missing", "folder", "empty", "text"])
def test_no_image_at_all(demo, tmp_path, kind):
    path = tmp_path / "near.tif"
    if kind == "folder":
        path.mkdir()
    elif kind != "missing":
        path.write_text("" if kind == "empty" else "near,wide\n")
    refused(Run(measure_arguments(demo, tmp_path / "out", near=path)), 2, "near.tif")
    nothing_written(tmp_path / "out")


def test_flat_of_another_size_and_flat_with_zeros(demo, instrument, tmp_path):
    tifffile.imwrite(tmp_path / "small.tif", numpy.ones((9, 9), numpy.float32))
    path = instrument((r"file = .*flat_near.tif", f"file = {tmp_path}/small.tif"))
    refused(Run(measure_arguments(demo, tmp_path / "out", instrument=path)), 2, "9 x 9", "flat")
    zeros = numpy.ones((512, 512), numpy.float32)
    zeros[7, 3] = 0
    tifffile.imwrite(tmp_path / "zeros.tif", zeros)
    path = instrument((r"file = .*flat_near.tif", f"file = {tmp_path}/zeros.tif"))
    refused(Run(measure_arguments(demo, tmp_path / "out", instrument=path)), 2, "x 3, y 7", "flat")
    nothing_written(tmp_path / "out")


# ---- settings ------------------------------------------------------------------------------------------------


def test_sub_critical_angle(demo, instrument, tmp_path):
    # asin(1.337 / 1.518) = 61.73 deg, closed form
    run = Run(measure_arguments(demo, tmp_path / "out", instrument=instrument((r"angle_deg = 70", "angle_deg = 60"))))
    refused(run, 2, "not totally reflected", "61.73 deg")
    nothing_written(tmp_path / "out")


def test_angle_beyond_the_objective(demo, instrument, tmp_path):
    run = Run(measure_arguments(demo, tmp_path / "out", instrument=instrument((r"angle_deg = 70", "angle_deg = 85"))))
    refused(run, 2, "objective")


def test_misspelt_key_names_file_line_and_nearest(demo, instrument, tmp_path):
    path = instrument((r"wavelength_nm", "wavelenght_nm"))
    run = Run(measure_arguments(demo, tmp_path / "out", instrument=path))
    refused(run, 2, f"{path}:3:", "wavelenght_nm", "nearest is wavelength_nm")
    nothing_written(tmp_path / "out")


@pytest.mark.parametrize("pattern, replacement, word", [
    (r"ratio = 1.5", "ratio = 1,5", "decimal point"),
    (r"size_um = .*", "size_um = 0", "out of range"),
    (r"estimate = yes", "estimate = maybe", "check or yes or no"),
    (r"model = exponential", "model = table", "file = decay.csv"),
    (r"cell_n = 1.37", "coating_nm = 10", "both coating_n and coating_nm"),
    (r"ratio = 1.5\n", "", "ratio"),
    (r"angle_deg = 70\n", "", "angle"),
    (r"substrate_n = .*", "substrate_n = 1.3", "substrate_n"),
])
def test_settings_that_cannot_be_used(demo, instrument, tmp_path, pattern, replacement, word):
    run = Run(measure_arguments(demo, tmp_path / "out", instrument=instrument((pattern, replacement))))
    refused(run, 2, word)
    nothing_written(tmp_path / "out")


def test_no_pixel_size_anywhere(demo, instrument, tmp_path):
    tifffile.imwrite(tmp_path / "near.tif", tifffile.imread(f"{demo}/day1_a_near.tif"))
    path = instrument((r"\[pixel\]\nsize_um = .*\n", ""))
    run = Run(measure_arguments(demo, tmp_path / "out", near=tmp_path / "near.tif", instrument=path))
    refused(run, 2, "size_um", "[pixel]")
    nothing_written(tmp_path / "out")


def test_pixel_size_from_the_file(demo, instrument, tmp_path, results):
    path = instrument((r"\[pixel\]\nsize_um = .*\n", ""))
    run = Run(measure_arguments(demo, tmp_path / "out", instrument=path))
    assert run.status == 0, run.err
    assert tree(tmp_path / "out")["cells.csv"] == tree(results["a"])["cells.csv"]


def test_instrument_file_given_as_assay(demo, tmp_path):
    arguments = measure_arguments(demo, tmp_path / "out")
    arguments[arguments.index("-a") + 1] = f"{demo}/day1.ini"
    refused(Run(arguments), 2, "day1.ini:2:", "belongs into an instrument file")


# ---- usage -----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("arguments, words", [
    (["mesure"], ["unknown command", "measure"]),
    (["measure", "--treads", "2"], ["--treads", "--threads"]),
    (["measure", "-i", "x.ini"], ["two images"]),
    (["measure", "a.tif", "b.tif", "c.tif"], ["one argument too many"]),
    (["measure", "a.tif", "b.tif", "-o", "x"], ["-i INSTRUMENT"]),
    (["measure", "a.tif", "b.tif", "-i", "x.ini"], ["-o OUT"]),
    (["measure", "a.tif", "b.tif", "-i"], ["needs a value"]),
    (["measure", "a.tif", "b.tif", "-i", "x.ini", "-o", "x", "-t", "0"], ["1 to 256"]),
    (["measure", "--quiet=yes"], ["takes no value"]),
    (["demo"], ["underfoot demo DIR"]),
    (["docs", "novel"], ["settings, columns or sheet-columns"]),
    (["optics", "--wavelength-nm", "488"], ["substrate_n"]),
    (["optics", "--wavelength-nm", "blue"], ["not a number"]),
])
def test_wrong_usage(arguments, words, tmp_path):
    refused(Run(arguments, cwd=tmp_path), 2, *words)
    assert tree(tmp_path) == {}


def test_no_arguments_shows_the_commands():
    run = Run([])
    assert run.status == 2 and "measure" in run.out


# ---- results that cannot be written ------------------------------------------------------------------------------


def test_out_below_a_file(demo, tmp_path):
    (tmp_path / "file").write_text("kept")
    refused(Run(measure_arguments(demo, tmp_path / "file/out")), 3, "file")
    assert tree(tmp_path) == {"file": b"kept"}


@pytest.mark.skipif(os.geteuid() == 0 and not os.path.exists("/usr/sbin/runuser"), reason="root may write anywhere")
def test_unwritable_folder(demo, tmp_path):
    locked = tmp_path / "locked"
    locked.mkdir()
    if os.geteuid() == 0:  # root may write anywhere, so somebody else tries; below a world-readable path
        import shutil
        import tempfile
        base = tempfile.mkdtemp(dir="/tmp")
        try:
            os.chmod(base, 0o755)
            shutil.copytree(demo, f"{base}/demo")
            shutil.copy(PROGRAM, f"{base}/underfoot")
            os.mkdir(f"{base}/locked", 0o755)
            subprocess.run(["chmod", "-R", "a+rX", base], check=True)
            done = subprocess.run(["/usr/sbin/runuser", "-u", "nobody", "--", f"{base}/underfoot",
                                   *measure_arguments(f"{base}/demo", f"{base}/locked/out")],
                                  capture_output=True, text=True)
            assert done.returncode == 3 and "locked" in done.stderr
            assert tree(f"{base}/locked") == {}
        finally:
            shutil.rmtree(base)
        return
    locked.chmod(0o555)
    refused(Run(measure_arguments(demo, locked / "out")), 3, "locked")


def test_full_disk_keeps_whole_files_or_none(demo, tmp_path):
    # a limit on file size stands in for a full disk: the label map fits, the gap map does not
    command = f"ulimit -f 300; exec {PROGRAM} {' '.join(map(str, measure_arguments(demo, tmp_path / 'out')))}"
    done = subprocess.run(["bash", "-c", command], capture_output=True, text=True)
    assert done.returncode == 3, done.stderr
    assert "gap" in done.stderr and "cannot be written" in done.stderr
    left = tree(tmp_path / "out")
    assert "run.json" not in left
    assert not [name for name in left if name.endswith(".part")]


@pytest.mark.parametrize("arguments", [["--help"], ["--version"], ["measure", "--help"], ["docs", "columns"], ["sheet", "--help"],
                                       ["optics", "--wavelength-nm", "488", "--substrate-n", "1.518", "--medium-n",
                                        "1.337", "--angle-deg", "70"]])
def test_standard_output_that_is_full(arguments):
    with open("/dev/full", "w") as full:
        done = subprocess.run([PROGRAM, *arguments], stdout=full, stderr=subprocess.PIPE, text=True)
    assert done.returncode == 3
    assert "standard output" in done.stderr


# ---- help --------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("command", ["measure", "optics", "demo", "docs", "sheet", "sheet build", "sheet check", "sheet layout"])
def test_help_has_an_example_that_runs(command, tmp_path):
    run = Run([*command.split(), "--help"])
    assert run.status == 0 and run.err == ""
    example = run.out.split("Example:\n")[1].split("\n\n")[0]
    script = example.replace("underfoot", PROGRAM)
    done = subprocess.run(["bash", "-e", "-c", script], cwd=tmp_path, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr


def test_help_lists_every_setting():
    text = Run(["measure", "--help"]).out
    page = open(os.path.join(ROOT, "docs/settings.md")).read()
    for key in re.findall(r"^- `(\w+)`", page, re.M):
        assert re.search(rf"^  {key} ", text, re.M), key


def commands_in(page):
    """Every command line in the fenced sh blocks of a page."""
    blocks = re.findall(r"```sh\n(.*?)```", open(os.path.join(ROOT, page)).read(), re.S)
    return "\n".join(line for block in blocks for line in block.split("\n") if line.startswith("underfoot"))


@pytest.mark.parametrize("page", ["README.md", "docs/measurement.md", "docs/optics.md", "docs/calibration.md", "docs/plates.md"])
def test_every_command_in_the_docs_runs(page, tmp_path):
    script = commands_in(page)
    assert script, f"{page} shows no command"
    path = os.path.dirname(PROGRAM) + ":" + os.environ["PATH"]
    done = subprocess.run(["bash", "-e", "-c", script], cwd=tmp_path, capture_output=True, text=True,
                          env=dict(os.environ, PATH=path))
    assert done.returncode == 0, done.stderr


def test_a_mask_of_several_pages_is_refused(demo, tmp_path):
    tifffile.imwrite(tmp_path / "mask.tif", numpy.zeros((2, 512, 512), numpy.uint16), photometric="minisblack")
    run = Run(measure_arguments(demo, tmp_path / "out") + ["--mask", str(tmp_path / "mask.tif")])
    refused(run, 2, "mask has 2 pages")
    nothing_written(tmp_path / "out")


def test_a_folder_holds_one_field(demo, tmp_path):
    out = str(tmp_path / "out")
    assert Run(measure_arguments(demo, out)).status == 0
    assert Run(measure_arguments(demo, out)).status == 0
    refused(Run(measure_arguments(demo, out, "b")), 2, "another field", "underfoot plate")


def test_the_same_image_twice_is_refused(demo, tmp_path):
    run = Run(measure_arguments(demo, tmp_path / "out", wide=f"{demo}/day1_a_near.tif"))
    refused(run, 2, "are the same image")


def test_an_ordinary_image_is_no_mask(demo, tmp_path):
    run = Run(measure_arguments(demo, tmp_path / "out") + ["--mask", f"{demo}/day1_a_wide.tif"])
    refused(run, 2, "ordinary image")


def test_an_edited_instrument_file_is_kept(tmp_path):
    assert Run(["demo", str(tmp_path)]).status == 0
    assert Run(["demo", str(tmp_path)]).status == 0
    ini = tmp_path / "day1.ini"
    ini.write_text(ini.read_text().replace("angle_deg = 70", "angle_deg = 71"))
    refused(Run(["demo", str(tmp_path)]), 3, "day1.ini", "edited")
    assert "angle_deg = 71" in ini.read_text()


def test_a_beginning_is_the_nearest_option():
    refused(Run(["optics", "--angle", "70"]), 2, "the nearest is --angle-deg")
