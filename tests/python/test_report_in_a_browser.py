"""The report as a reader sees it, in Debian's Chromium without a screen: on a desk, on a phone, on paper.

Skipped with a reason where Chromium and its driver are not installed (`apt-get install chromium chromium-driver`;
tools/test does so as root with CI=true). PELLICLE_SCREENSHOTS names a folder in which pictures and PDF are left.
"""

import base64
import json
import os
import re
import shutil
from pathlib import Path

import program
import pytest

CHROMIUM, DRIVER = shutil.which("chromium"), shutil.which("chromedriver")
pytestmark = pytest.mark.skipif(
    not (CHROMIUM and DRIVER), reason="needs Debian's packages chromium and chromium-driver"
)

FLAGS = [
    "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
    "--disable-background-networking", "--disable-component-update", "--disable-sync", "--hide-scrollbars",
]

SCENARIO = """
title = "A small vesicle with two phases"
[surface]
shape = "ellipsoid"
semi_axes = ["1 um", "1 um", "1.5 um"]
edge_length = "0.25 um"
[membrane]
bending_rigidity = "20 kBT"
shear_viscosity = "{viscosity} N s/m"
[composition]
line_tension = "0.2 pN"
interface_width = "0.5 um"
diffusion_constant = "20 um^2/s"
mean = 0.4
noise = 0.02
[time]
end = "3 ms"
[output]
frame_every = "1 ms"
"""

#: Everything that is drawn, with its place and size on the page.
BOXES = """
const box = e => { const r = e.getBoundingClientRect(); return [r.left, r.top + scrollY, r.width, r.height]; };
const all = s => [...document.querySelectorAll(s)];
return {
  plots: all('figure.plot > svg').map(e => ({name: e.getAttribute('aria-label'), box: box(e),
      lines: [...e.querySelectorAll('polyline')].map(box), texts: [...e.querySelectorAll('text')].map(t => [t.textContent, box(t)]),
      size: [...e.querySelectorAll('text')].map(t => 12 * t.getScreenCTM().a)})),
  shapes: all('figure.shape > svg').map(e => ({name: e.getAttribute('aria-label'), box: box(e),
      triangles: e.querySelectorAll('path').length, drawn: box(e.querySelector('path'))})),
  legends: all('.legend span').map(e => [e.textContent.trim(), box(e)]),
  headings: all('h1, h2, h3').map(e => e.textContent),
  width: document.documentElement.scrollWidth, height: document.documentElement.scrollHeight,
  view: document.documentElement.clientWidth,
};
"""


@pytest.fixture(scope="module")
def pages(tmp_path_factory):
    """Reports of one run, and of two runs overlaid."""
    folder = tmp_path_factory.mktemp("report")
    runs = [program.run(folder, SCENARIO.format(viscosity=v), n).folder for v, n in (("1e-9", "thin"), ("2e-9", "thick"))]
    program.call("report", runs[0], "--out", folder / "one.html")
    program.call("report", *runs, "--out", folder / "two.html")
    return folder


def look(page: Path, width: int, height: int, profile: Path, pdf=False):
    """Boxes, console messages, requests, and a picture of a page."""
    from selenium import webdriver
    from selenium.webdriver.chrome.service import Service

    options = webdriver.ChromeOptions()
    options.binary_location = CHROMIUM
    for flag in [*FLAGS, f"--user-data-dir={profile}", f"--window-size={width},{height}"]:
        options.add_argument(flag)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    driver = webdriver.Chrome(options=options, service=Service(DRIVER))
    try:
        metrics = {"width": width, "height": height, "deviceScaleFactor": 1, "mobile": width < 500}
        driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", metrics)
        driver.get(page.as_uri())
        seen = driver.execute_script(BOXES)
        seen["console"] = [entry["message"] for entry in driver.get_log("browser")]
        events = [json.loads(entry["message"])["message"] for entry in driver.get_log("performance")]
        # Chromium's own start page asks for things of its own.
        asked = [event["params"] for event in events if event["method"] == "Network.requestWillBeSent"]
        seen["requests"] = [event["request"]["url"] for event in asked if event["documentURL"] == page.as_uri()]
        clip = {"x": 0, "y": 0, "width": width, "height": min(seen["height"], 8000), "scale": 1}
        shot = driver.execute_cdp_cmd("Page.captureScreenshot", {"captureBeyondViewport": True, "clip": clip})
        seen["picture"] = base64.b64decode(shot["data"])
        if pdf:
            paper = {"paperWidth": 8.27, "paperHeight": 11.69, "printBackground": True}
            seen["pdf"] = base64.b64decode(driver.execute_cdp_cmd("Page.printToPDF", paper)["data"])
    finally:
        driver.quit()
    kept = os.environ.get("PELLICLE_SCREENSHOTS")
    if kept:
        Path(kept).mkdir(parents=True, exist_ok=True)
        (Path(kept) / f"{page.stem}_{width}.png").write_bytes(seen["picture"])
        if pdf:
            (Path(kept) / f"{page.stem}.pdf").write_bytes(seen["pdf"])
    return seen


def overlap(a, b) -> bool:
    """Whether two boxes share more than a sliver."""
    return (min(a[0] + a[2], b[0] + b[2]) - max(a[0], b[0]) > 1) and (min(a[1] + a[3], b[1] + b[3]) - max(a[1], b[1]) > 2)


@pytest.mark.parametrize("width, height", [(1280, 900), (390, 844)], ids=["desk", "phone"])
@pytest.mark.parametrize("name", ["one", "two"])
def test_all_is_there_and_can_be_read(pages, tmp_path, name, width, height):
    page = pages / f"{name}.html"
    seen = look(page, width, height, tmp_path / "profile")
    assert seen["console"] == []
    # The page itself, and nothing else from anywhere.
    assert seen["requests"] == [page.as_uri()]
    assert seen["headings"][1:] != [] and seen["headings"].count("Over time") == 1
    names = [plot["name"] for plot in seen["plots"]]
    for title in ["Free energy", "Energies", "Ledger", "Energy balance error", "Area", "Volume", "Tension", "Domains",
                  "Length of boundaries"]:
        assert any(name.startswith(title) for name in names), title
    assert len(seen["shapes"]) == (4 if name == "one" else 8)
    for plot in seen["plots"]:
        left, _, wide, high = plot["box"]
        assert wide > 250 and high > 100 and left >= 0 and left + wide <= width, plot["name"]
        assert plot["lines"] and all(line[2] > 1 for line in plot["lines"]), plot["name"]
        # Tick labels do not run into each other, and stay within the drawing.
        boxes = [box for _, box in plot["texts"]]
        for k, box in enumerate(boxes):
            assert box[2] > 0 and box[0] >= left - 1 and box[0] + box[2] <= left + wide + 1, (plot["name"], plot["texts"][k])
            assert not any(overlap(box, other) for other in boxes[k + 1 :]), (plot["name"], plot["texts"][k])
        # Each axis has distinct labels: those in one column, and those in one row.
        for place in (1, 0):
            groups = {}
            for text, box in plot["texts"]:
                edge = box[1] if place else box[0] + box[2]
                groups.setdefault(round(edge), []).append(text)
            assert all(len(set(group)) == len(group) for group in groups.values()), (plot["name"], groups)
        assert min(plot["size"]) >= 8, f"{plot['name']}: letters of {min(plot['size']):.1f} pixels"
        assert any(re.fullmatch(r"time \[[mµn]?s\]", text) for text, _ in plot["texts"])
    for shape in seen["shapes"]:
        assert shape["box"][2] > 100 and shape["triangles"] > 50 and shape["drawn"][2] > 0
        assert shape["box"][0] + shape["box"][2] <= width
    assert all(box[2] > 0 and box[3] > 0 for _, box in seen["legends"])
    # Nothing makes the page wider than the window.
    assert seen["width"] <= width


def test_runs_are_told_apart(pages, tmp_path):
    """Two runs overlaid: each has its lines and its name in the legend."""
    seen = look(pages / "two.html", 1280, 900, tmp_path / "profile")
    free = next(plot for plot in seen["plots"] if plot["name"].startswith("Free energy"))
    assert len(free["lines"]) == 2
    assert {"thin", "thick"} <= {text for text, _ in seen["legends"]}


def test_paper(pages, tmp_path):
    """A PDF of A4 pages, with the scenario that is folded away on the screen."""
    seen = look(pages / "one.html", 1280, 900, tmp_path / "profile", pdf=True)
    assert seen["pdf"].startswith(b"%PDF")
    count = len(re.findall(rb"/Type\s*/Page\b", seen["pdf"]))
    assert 2 <= count <= 8, count
    if shutil.which("pdftotext"):
        import subprocess

        (tmp_path / "one.pdf").write_bytes(seen["pdf"])
        text = subprocess.run(["pdftotext", "-layout", tmp_path / "one.pdf", "-"], capture_output=True, text=True, check=True).stdout
        assert "bending_rigidity" in text and "Free energy" in text
