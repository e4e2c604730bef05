"""What the command-line tests share: the program, and one demo experiment measured once."""
import os
import subprocess

import pytest

ROOT = os.path.dirname(os.path.dirname(os.path.dirname(os.path.abspath(__file__))))
PROGRAM = os.environ.get("UF_PROGRAM", os.path.join(ROOT, "build/release/underfoot"))


class Run:
    """One finished run of the program."""

    def __init__(self, arguments, program=PROGRAM, cwd=None, env=None):
        done = subprocess.run([program, *map(str, arguments)], capture_output=True, text=True, cwd=cwd,
                              env=dict(os.environ, **(env or {})), timeout=600)
        self.status, self.out, self.err = done.returncode, done.stdout, done.stderr


def tree(folder):
    """Every file below a folder: relative path -> bytes."""
    found = {}
    for base, _, names in os.walk(folder):
        for name in names:
            path = os.path.join(base, name)
            with open(path, "rb") as file:
                found[os.path.relpath(path, folder)] = file.read()
    return found


def measure_arguments(demo, out, field="a", near=None, wide=None, instrument=None):
    return ["measure", near or f"{demo}/day1_{field}_near.tif", wide or f"{demo}/day1_{field}_wide.tif",
            "-i", instrument or f"{demo}/day1.ini", "-a", f"{demo}/assay.ini", "-o", out]


@pytest.fixture(scope="session")
def demo(tmp_path_factory):
    folder = str(tmp_path_factory.mktemp("demo"))
    run = Run(["demo", folder])
    assert run.status == 0, run.err
    return folder


@pytest.fixture(scope="session")
def results(demo, tmp_path_factory):
    """Every field of the demo, measured: field -> its folder."""
    folders = {}
    for field in "abcd":
        folders[field] = str(tmp_path_factory.mktemp("results") / field)
        run = Run(measure_arguments(demo, folders[field], field))
        assert run.status == 0, run.err
    return folders
