"""How fast the live page answers the hand: a real browser against the real server, as percentiles.

    python tests/live_benchmark.py [ROUNDS]

Prints milliseconds from a changed hole to its new pixels on the screen: coarse and fine, at one
distance and with a distance map; and from the command to the first picture. Asked for, with one
megapixel and one distance: medians below 60 ms coarse and 200 ms fine, 95 % below twice that, the
first picture within 1.5 s. The load stands beside, as other work makes all of it slower.
"""

import os
import sys
import tempfile
import time
from pathlib import Path

from benchmark import as_installed
from live_browser import browser, live, settled

# One step of the slider, timed in the page: from the event to the end of the frame with its pixels.
_STEP = """
async (value) => {
  const slider = document.querySelector('input[aria-label="Diameter, slider"]');
  const canvas = document.getElementById("picture");
  const painted = () => new Promise((done) => requestAnimationFrame(() => setTimeout(done, 0)));
  const times = {};
  const start = performance.now();
  slider.value = value;
  slider.dispatchEvent(new Event("input", { bubbles: true }));
  slider.dispatchEvent(new Event("change", { bubbles: true }));
  const wanted = JSON.stringify(pinsimState());
  while (!("fine" in times)) {
    if (canvas.dataset.state === wanted) {
      const { quality } = canvas.dataset;
      if (!(quality in times)) { await painted(); times[quality] = performance.now() - start; }
    }
    await new Promise((done) => setTimeout(done, 1));
    if (performance.now() - start > 20000) return null;
  }
  return times;
}
"""


def main(rounds: int = 40) -> None:
    """Print the table."""
    as_installed()
    _once()
    print(f"load {' '.join(f'{one:.1f}' for one in os.getloadavg())}, {os.cpu_count()} cores, ms")
    for name, state in (
        ("one distance", "#hole_mm=0.3&frame=6x6&depth_mm=60&distance_mm=infinity"),
        ("distance map", "#hole_mm=0.3&frame=6x6&depth_mm=60"),
    ):
        with tempfile.TemporaryDirectory() as folder, browser() as started:
            page = started.new_page(viewport={"width": 1440, "height": 900})
            begin = time.perf_counter()
            with live("sample:courtyard", folder=Path(folder)) as address:
                page.goto(address + state)
                page.wait_for_function("() => document.getElementById('picture').dataset.quality")
                first = 1000 * (time.perf_counter() - begin)
                settled(page)
                found = {"coarse": [], "fine": []}
                for k in range(rounds + 3):
                    times = page.evaluate(_STEP, 400 + (37 * k) % 200)
                    settled(
                        page
                    )  # so that the figures of this hole do not stand in the way of the next
                    if k < 3 or times is None:
                        continue  # the first ones fill what is kept
                    for quality, milliseconds in times.items():
                        found[quality].append(milliseconds)
        print(f"{name}: first picture {first:.0f}")
        for quality, all_ms in found.items():
            print(
                f"  {quality}: "
                + ", ".join(f"{p} % {_percentile(all_ms, p):.0f}" for p in (50, 75, 95))
            )
    print(f"load {' '.join(f'{one:.1f}' for one in os.getloadavg())}")


def _once() -> None:
    """Start the server and look at the page once: all modules are compiled then."""
    with tempfile.TemporaryDirectory() as folder, browser() as started:
        page = started.new_page()
        with live("sample:courtyard", folder=Path(folder)) as address:
            page.goto(address)
            settled(page)


def _percentile(values: list[float], percent: float) -> float:
    ordered = sorted(values)
    return (
        ordered[min(len(ordered) - 1, int(len(ordered) * percent / 100))]
        if ordered
        else float("nan")
    )


if __name__ == "__main__":
    main(*(int(one) for one in sys.argv[1:2]))
