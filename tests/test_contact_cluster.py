"""A contact sheet by a real Dask cluster on this machine, one of whose workers dies in the middle."""

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from conftest import landscape_codes
from PIL import Image

ROOT = Path(__file__).resolve().parents[1]
SHEET = ("--view", "40deg", "--film", "8mmx6mm", "--focal-length", "20mm", "--width", "96")
HOLES = tuple(part for k in range(16) for part in ("--hole", f"0.{30 + k}mm"))

pytest.importorskip("distributed", reason="needs dask[distributed], the extra 'cluster'")


def started(*arguments, folder):
    return subprocess.Popen(
        [sys.executable, *map(str, arguments)],
        cwd=folder,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
    )


@pytest.fixture
def cluster(tmp_path):
    """Run a scheduler and two workers of one thread; yield its address and the workers."""
    file = tmp_path / "scheduler.json"
    common = ("--no-dashboard", "--scheduler-file", file)
    scheduler = started(
        *("-m", "distributed.cli.dask_scheduler", "--host", "127.0.0.1", "--port", "0", *common),
        folder=tmp_path,
    )
    workers = [
        started(
            *("-m", "distributed.cli.dask_worker", "--host", "127.0.0.1", "--nthreads", "1"),
            *("--no-nanny", "--local-directory", tmp_path / f"worker{k}", *common),
            folder=tmp_path,
        )
        for k in range(2)
    ]
    try:
        end = time.monotonic() + 60.0
        while not file.exists() and time.monotonic() < end:
            time.sleep(0.1)
        yield json.loads(file.read_text())["address"], workers
    finally:
        for process in (*workers, scheduler):
            if process.poll() is None:
                process.kill()
            process.wait()


def threads_of(address):
    """Return how many threads the scheduler has, asked from a process of its own."""
    code = (
        "import sys, distributed; c = distributed.Client(sys.argv[1]); "
        "print(sum(c.nthreads().values())); c.close()"
    )
    asked = subprocess.run(
        [sys.executable, "-c", code, address], capture_output=True, text=True, check=True
    )
    return int(asked.stdout.split()[-1])


def sheet(folder, *arguments, name):
    return subprocess.Popen(
        [
            *(sys.executable, "-m", "pinsim", "contact-sheet", "photo.png", *SHEET, *HOLES),
            *("--page", "A4", "-o", name, *arguments),
        ],
        cwd=folder,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )


def test_a_sheet_survives_the_death_of_a_worker(tmp_path, cluster):
    address, workers = cluster
    Image.fromarray(landscape_codes()).save(tmp_path / "photo.png")
    end = time.monotonic() + 60.0
    while threads_of(address) < 2 and time.monotonic() < end:
        time.sleep(0.3)
    process = sheet(tmp_path, "--dask", address, name="sheet.png")
    told = ""
    while told.count(": done\n") < 3:
        line = process.stderr.readline()
        assert line, told
        told += line
    os.kill(workers[0].pid, signal.SIGKILL)
    out, rest = process.communicate(timeout=120)
    told += rest
    assert process.returncode == 0, told + out
    assert told.count(": done\n") == 16
    assert workers[1].poll() is None
    alone = sheet(tmp_path, "--quiet", name="alone.png")
    alone.communicate(timeout=120)
    assert alone.returncode == 0
    assert (tmp_path / "sheet.png").read_bytes() == (tmp_path / "alone.png").read_bytes()


def test_a_scheduler_that_nobody_runs_is_named_in_one_line(tmp_path):
    Image.fromarray(landscape_codes()).save(tmp_path / "photo.png")
    process = sheet(tmp_path, "--dask", "tcp://127.0.0.1:9", "--quiet", name="sheet.png")
    _, err = process.communicate(timeout=120)
    assert process.returncode == 2
    assert "no Dask scheduler answers at 'tcp://127.0.0.1:9'" in err
    assert "Traceback" not in err
    assert not (tmp_path / "sheet.png").exists()
    assert not (tmp_path / "sheet.png.frames").exists()
