"""A real `pinsim live` and a real browser, for the page's checks, pictures and speed."""

import contextlib
import os
import re
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

BROWSERS = ("chromium", "chromium-browser", "google-chrome")
# The background work of a browser asks for hosts far away; ours must ask for none.
FLAGS = (
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--disable-dev-shm-usage",
)


def chromium() -> str | None:
    """Return where the browser is, if there is one."""
    return next(filter(None, map(shutil.which, BROWSERS)), None)


@contextlib.contextmanager
def live(*arguments: str, folder: Path) -> Iterator[str]:
    """Start pinsim live without opening a browser; yields the address it printed."""
    environment = {**os.environ, "PYTHONUNBUFFERED": "1", "OPENBLAS_NUM_THREADS": "1"}
    root = str(Path(__file__).parent.parent)
    environment["PYTHONPATH"] = os.pathsep.join([root, environment.get("PYTHONPATH", "")])
    log = folder / "live.log"
    with log.open("w") as file:
        process = subprocess.Popen(
            [sys.executable, "-m", "pinsim", "live", *arguments, "--no-browser"],
            stdout=file,
            stderr=subprocess.STDOUT,
            env=environment,
            cwd=folder,
        )
    try:
        yield _address(process, log)
    finally:
        process.terminate()
        try:
            process.wait(10)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()


def _address(process: "subprocess.Popen[bytes]", log: Path) -> str:
    for _ in range(1200):
        found = re.search(r"http://127\.0\.0\.1:\d+/open\?token=\S+", log.read_text())
        if found:
            return found[0]
        if process.poll() is not None:
            break
        time.sleep(0.025)
    raise RuntimeError(f"pinsim live did not start: {log.read_text()}")


@contextlib.contextmanager
def browser(**options: Any) -> Iterator[Any]:
    """Start a headless browser with an empty profile."""
    from playwright.sync_api import sync_playwright

    with sync_playwright() as playwright, tempfile.TemporaryDirectory() as home:
        started = playwright.chromium.launch(
            executable_path=chromium(),
            args=list(FLAGS),
            env={**os.environ, "HOME": home},
            **options,
        )
        try:
            yield started
        finally:
            started.close()


def drawn(page: Any, timeout_ms: int = 60_000) -> None:
    """Wait until the fine picture of the present state is on the page."""
    page.wait_for_function(
        """() => {
          const canvas = document.getElementById("picture");
          return document.documentElement.dataset.ready === "yes" && canvas.dataset.quality === "fine"
            && canvas.dataset.state === JSON.stringify(pinsimState());
        }""",
        timeout=timeout_ms,
    )


def settled(page: Any, timeout_ms: int = 60_000) -> None:
    """Wait until the fine picture and all figures of the present state are on the page."""
    drawn(page, timeout_ms)
    page.wait_for_function(
        "() => document.getElementById('figures').dataset.state === JSON.stringify(pinsimState())",
        timeout=timeout_ms,
    )
