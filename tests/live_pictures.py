"""Make the pictures of docs/live.md: the page in a real browser.

python tests/live_pictures.py
"""

import io
import tempfile
from pathlib import Path

from live_browser import browser, live, settled
from PIL import Image

FOLDER = Path(__file__).parent.parent / "docs" / "pictures"
# name: (width, height, theme, state)
PICTURES = {
    "live": (1440, 900, "light", "#hole_mm=0.3&plate_mm=0.05&name=Square%20box"),
    "live-two": (
        *(1440, 900, "dark"),
        "#scene=sample%3Alane&hole_mm=0.24&depth_mm=45&frame=6x12&plate_mm=0.03&name=Wide%20box"
        "&a=1&a.hole_mm=0.6",
    ),
    "live-small": (380, 820, "light", "#scene=sample%3Atabletop&hole_mm=0.3&plate_mm=0.05"),
}


def main() -> None:
    """Write all of them."""
    with (
        tempfile.TemporaryDirectory() as folder,
        live(folder=Path(folder)) as address,
        browser() as started,
    ):
        for name, (width, height, theme, state) in PICTURES.items():
            context = started.new_context(
                viewport={"width": width, "height": height}, color_scheme=theme
            )
            page = context.new_page()
            page.goto(address + state)
            settled(page)
            if "a=1" in state:
                page.locator("#pinned[data-quality=fine]").wait_for()
                page.locator("#difference li").first.wait_for()
            image = Image.open(io.BytesIO(page.screenshot())).convert("RGB")
            image.save(FOLDER / f"{name}.jpg", quality=86)
            context.close()


if __name__ == "__main__":
    main()
