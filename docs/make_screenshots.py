"""Makes the pictures of the page in docs/: the demo at desktop and phone width, by day and by night.

Run it where Debian's chromium is installed, after a change to the page, and look at what comes out.
"""

import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

from PIL import Image
from playwright.sync_api import sync_playwright

DOCS = Path(__file__).parent
COLOURS = 128
DESKTOP, PHONE = {"width": 1280, "height": 1180}, {"width": 390, "height": 1500}

SHOTS = {
    "page": ("#c03", DESKTOP, "light"),
    "page-night": ("#c02/f1", DESKTOP, "dark"),
    "page-phone": ("#c02", PHONE, "light"),
}


def main() -> None:
    """Write each picture anew."""
    with tempfile.TemporaryDirectory() as place:
        report = Path(place) / "report"
        command = [sys.executable, "-m", "rtpaudit", "demo", "--out", str(report), "--zone", "Europe/Oslo", "--quiet"]
        subprocess.run(command, check=True)
        with sync_playwright() as driver:
            browser = driver.chromium.launch(executable_path=shutil.which("chromium"), args=["--no-sandbox"])
            for name, (fragment, size, scheme) in SHOTS.items():
                page = browser.new_page(viewport=size, color_scheme=scheme)
                page.goto(f"{(report / 'index.html').as_uri()}{fragment}")
                page.wait_for_selector("html[data-ready]", state="attached")
                page.wait_for_timeout(300)
                page.screenshot(path=DOCS / f"{name}.png")
                page.close()
            browser.close()
    for name in SHOTS:
        picture = Image.open(DOCS / f"{name}.png").convert("RGB")
        picture.quantize(COLOURS, dither=Image.Dither.NONE).save(DOCS / f"{name}.png", optimize=True)


if __name__ == "__main__":
    main()
