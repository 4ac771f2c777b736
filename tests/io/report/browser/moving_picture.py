"""The README's picture of the moving gain sheet: the paddle, its ribbon dragged up, as the browser shows it.

From the top of the checkout: python tests/io/report/browser/moving_picture.py
"""

import base64
import shutil
import sys
import tempfile
from pathlib import Path

WIDE, TALL = 800, 1400
UP = "const r = document.querySelector('[role=slider]'); const key = new KeyboardEvent('keydown', { key: 'PageUp' });"
BOX = "const b = document.getElementById('moving').getBoundingClientRect(); return [b.x, b.y, b.width, b.height]"


def take(report: Path, picture: Path) -> None:
    """Open a report, move its ribbon by ten gains, and keep what the sheet shows."""
    from selenium import webdriver

    options = webdriver.ChromeOptions()
    for argument in ("--headless=new", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage", "--hide-scrollbars"):
        options.add_argument(argument)
    options.binary_location = str(shutil.which("chromium"))
    driver = webdriver.Chrome(options=options, service=webdriver.ChromeService(shutil.which("chromedriver")))
    try:
        size = {"width": WIDE, "height": TALL, "deviceScaleFactor": 1, "mobile": False}
        driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", size)
        driver.get(report.resolve().as_uri())
        driver.execute_script(f"{UP} r.dispatchEvent(key);")
        x, y, wide, tall = driver.execute_script(BOX)
        clip = {"x": x, "y": y, "width": wide, "height": tall, "scale": 1}
        shot = driver.execute_cdp_cmd("Page.captureScreenshot", {"captureBeyondViewport": True, "clip": clip})
        picture.write_bytes(base64.b64decode(shot["data"]))
    finally:
        driver.quit()


def main() -> int:
    """Process the paddle aside and take the picture."""
    from gainwright.io.deliver import deliver

    with tempfile.TemporaryDirectory() as folder:
        deliver(Path("sample_runs/paddle/rig.toml"), Path(folder))
        take(Path(folder) / "report.html", Path("sample_runs/pictures/paddle_moving.png"))
    return 0


if __name__ == "__main__":
    sys.exit(main())
