"""report.html in a real browser: nothing fetched, nothing wrong on the console, the view drawn, read and cut."""

from __future__ import annotations

import os
import shutil
import sys
from importlib.util import module_from_spec, spec_from_file_location
from pathlib import Path

import numpy as np
import pytest

from coldseam.mesh.locate import locate

sync_api = pytest.importorskip("playwright.sync_api", reason="playwright comes with scripts/setup (the test extra)")
CHROMIUM = os.environ.get("CHROMIUM") or shutil.which("chromium") or shutil.which("chromium-browser")
if CHROMIUM is None:
    pytest.skip("no chromium here (Debian: apt-get install chromium; scripts/test does that)", allow_module_level=True)

FLAGS = ["--no-sandbox", "--use-gl=angle", "--use-angle=swiftshader", "--enable-unsafe-swiftshader"]
WIDTHS = (360, 1024, 1600)
CASES = Path(__file__).parents[2] / "cases"


def load_reports():
    """Return the module that makes reports of the models."""
    name = "coldseam_report_reports"
    if name not in sys.modules:
        spec = spec_from_file_location(name, Path(__file__).with_name("reports.py"))
        sys.modules[name] = module_from_spec(spec)
        spec.loader.exec_module(sys.modules[name])
    return sys.modules[name]


reports = load_reports()


@pytest.fixture(scope="module")
def browser():
    """A browser that draws in software."""
    with sync_api.sync_playwright() as playwright:
        started = playwright.chromium.launch(executable_path=CHROMIUM, args=FLAGS)
        yield started
        started.close()


@pytest.fixture(scope="module", params=["bolted_panel", "square", "pipe"])
def made(request, view, tmp_path_factory):
    """The model and its report, one solid, one plane, one axisymmetric; with a title that no line can hold."""
    model = view(request.param)
    title = "Wall <b>of</b> " + "unbroken" * 40 if request.param == "square" else "A wall"
    return model, reports.report(model, tmp_path_factory.mktemp(request.param), title=title)


@pytest.fixture(scope="module")
def opened(browser, made):
    """The report, open and drawn; starting to draw takes seconds, so the tests of one report share it."""
    with Opened(browser, made[1]).drawn() as page:
        yield page


class Opened:
    """A page, with everything it asked for and complained of."""

    def __init__(self, browser, path: Path, width: int = 1024, scripts: bool = True):
        self.context = browser.new_context(
            viewport={"width": width, "height": 900}, java_script_enabled=scripts, offline=True
        )
        self.page = self.context.new_page()
        self.asked, self.wrong = [], []
        self.page.on("request", lambda r: self.asked.append(r.url) if not r.url.startswith("data:") else None)
        self.page.on("console", lambda m: self.wrong.append(m.text) if m.type in ("error", "warning") else None)
        self.page.on("pageerror", lambda e: self.wrong.append(str(e)))
        self.page.goto(path.as_uri())
        self.path = path

    def drawn(self):
        """Wait until the view has drawn."""
        self.page.wait_for_selector("#view canvas[data-drawn=yes]", timeout=20_000)
        return self

    def __enter__(self):
        return self

    def __exit__(self, *_):
        self.context.close()

    def quiet(self) -> bool:
        """Whether nothing but the file itself was asked for and nothing was wrong."""
        # Software drawing warns of its own slowness when pixels are read back; that is no fault of the page.
        wrong = [text for text in self.wrong if "GPU stall due to ReadPixels" not in text]
        return self.asked == [self.path.as_uri()] and wrong == []

    def pixels(self) -> np.ndarray:
        """Return the picture of the canvas, (height, width, 3)."""
        import io

        from PIL import Image

        return np.asarray(Image.open(io.BytesIO(self.page.locator("#view canvas").screenshot())).convert("RGB")).astype(
            int
        )

    def read_at(self, place) -> str:
        """Point at a place, mm, and return what is told."""
        canvas = self.page.locator("#view canvas")
        canvas.scroll_into_view_if_needed()
        box = canvas.bounding_box()
        x, y, _ = canvas.evaluate("(c, at) => c.coldseam.project(at)", [float(v) for v in place])
        self.page.mouse.move(box["x"] + x, box["y"] + y)
        return self.page.locator("output[data-view=reading]").inner_text()


def temperature_told(words: str) -> float:
    return float(words.split(" ")[0])


def field_at(model, told: np.ndarray, temperature: float) -> float:
    """Return the solved temperature at a place that was told, mm."""
    if model.mesh.dim == 3:
        return temperature  # the warm face is so even that a pixel makes no difference
    cells, weights = locate(model.mesh, told[None] * 1e-3)
    return float((model.temperature[model.mesh.cells[cells]] * weights).sum())


def visible_places(model) -> list[tuple[np.ndarray, float]]:
    """Return a few places that the first view shows, mm, with their temperature: middles of facets or cells."""
    mesh = model.mesh
    if mesh.dim == 2:
        rows = mesh.cells[:: max(1, len(mesh.cells) // 5)]
    else:
        middle = mesh.points[mesh.facets].mean(axis=1)
        rows = mesh.facets[middle[:, 2] > mesh.points[:, 2].max() - 1e-9]
        rows = rows[:: max(1, len(rows) // 5)]
    return [(mesh.points[row].mean(axis=0) * 1e3, float(model.temperature[row].mean())) for row in rows]


def test_the_view_is_drawn_and_reads_the_solved_temperature(made, opened):
    model = made[0]
    seen = opened.pixels()
    assert len(np.unique(seen.reshape(-1, 3), axis=0)) > 50
    assert (seen.sum(axis=2) < 700).mean() > 0.02
    for place, temperature in visible_places(model):
        words = opened.read_at(place)
        told = np.array([float(x) for x in words.split("(")[1].split(")")[0].split(",")])
        # A pixel is some half millimetre wide, over which the pipe's temperature varies: the place told decides.
        assert np.abs(told - place).max() < 2.0
        assert temperature_told(words) == pytest.approx(field_at(model, told, temperature), abs=0.05)
    assert opened.quiet(), (opened.asked, opened.wrong)


def test_the_cut_moves_and_shows_the_field_inside(browser, view, tmp_path):
    model = view("bolted_panel")
    with Opened(browser, reports.report(model, tmp_path)).drawn() as opened:
        page = opened.page
        whole = opened.pixels()
        page.select_option("[data-view=axis]", "1")
        pictures = []
        for part in (300, 620):
            page.fill("[data-view=cut]", str(part))
            pictures.append(opened.pixels())
        assert all((np.abs(a - b).sum(axis=2) > 30).mean() > 0.01 for a, b in ((whole, pictures[0]), pictures))
        level = 0.620 * np.ptp(model.mesh.points[:, 1])
        told = [opened.read_at((x, 1e3 * level, z)) for x in (60, 110, 260) for z in (30, 55)]
        at = np.array([(x, 1e3 * level, z) for x in (60, 110, 260) for z in (30, 55)]) * 1e-3
        cells, weights = locate(model.mesh, at)
        solved = (model.temperature[model.mesh.cells[cells]] * weights).sum(axis=1)
        # The pixel's place is told too: hold the temperature against the field there, not where the mouse was meant to be.
        for words, wanted in zip(told, solved, strict=True):
            place = np.array([float(x) for x in words.split("(")[1].split(")")[0].split(",")]) * 1e-3
            cell, weight = locate(model.mesh, place[None])
            exact = float((model.temperature[model.mesh.cells[cell]] * weight).sum())
            assert temperature_told(words) == pytest.approx(exact, abs=0.05)
            assert place[1] == pytest.approx(level, abs=1e-4) and exact == pytest.approx(wanted, abs=1.0)
        assert opened.quiet(), (opened.asked, opened.wrong)


def test_every_field_can_be_shown_and_keys_work(browser, view, tmp_path):
    with Opened(browser, reports.report(view("bolted_panel"), tmp_path)).drawn() as opened:
        page = opened.page
        names = page.locator("[data-view=field] option").all_inner_texts()
        assert names == ["Temperature", "Heat flux", "Excess heat flux", "Bodies"]
        pictures = []
        for name in names:
            page.select_option("[data-view=field]", label=name)
            pictures.append(opened.pixels())
        assert all(np.abs(a - b).sum() > 0 for k, a in enumerate(pictures) for b in pictures[:k])
        page.locator("#view canvas").focus()
        before = opened.pixels()
        page.keyboard.press("ArrowLeft")
        assert np.abs(opened.pixels() - before).sum() > 0
        page.keyboard.press("Enter")
        assert "°C" in page.locator("output[data-view=reading]").inner_text()
        assert opened.quiet(), (opened.asked, opened.wrong)


@pytest.mark.parametrize("width", WIDTHS)
def test_nothing_overflows(opened, width):
    opened.page.set_viewport_size({"width": width, "height": 900})
    outside = opened.page.evaluate(
        """() => [...document.querySelectorAll("body *")].filter((e) => {
             const box = e.getBoundingClientRect();
             return box.width && box.height > 1 && box.right > innerWidth + 1 && !(innerWidth < 700 && e.closest("thead"));
           }).map((e) => e.tagName + " " + e.textContent.slice(0, 40))"""
    )
    assert outside == []
    assert opened.page.evaluate("document.documentElement.scrollWidth") <= width


def test_the_still_picture_shows_without_scripts(browser, made):
    with Opened(browser, made[1], scripts=False) as opened:
        assert opened.page.locator("#view img").is_visible()
        assert not opened.page.locator("#view canvas").is_visible()
        assert opened.asked == [made[1].as_uri()]


def test_paper_holds_every_table(opened):
    opened.page.emulate_media(media="print")
    for paper, width in (("A4", 210 - 28), ("Letter", 215.9 - 28)):
        pixels = int(width / 25.4 * 96)
        opened.page.set_viewport_size({"width": pixels, "height": 900})
        cut = opened.page.evaluate(
            "(wide) => [...document.querySelectorAll('table, pre, img')].filter((e) => "
            "e.getBoundingClientRect().right > wide + 1).map((e) => e.textContent.slice(0, 40))",
            pixels,
        )
        assert cut == []
        assert opened.page.locator("#view img").is_visible() and not opened.page.locator("#view canvas").is_visible()
        assert opened.page.pdf(format=paper)[:5] == b"%PDF-"
    opened.page.emulate_media(media="screen")


def test_no_serious_barriers(browser, made):
    axe = pytest.importorskip("axe_playwright_python.sync_playwright", reason="axe: the test extra")
    # The checker is injected as a script, which the page's own policy rightly refuses: it is lifted for this test alone.
    context = browser.new_context(bypass_csp=True)
    page = context.new_page()
    page.goto(made[1].as_uri())
    page.wait_for_selector("#view canvas[data-drawn=yes]")
    found = axe.Axe().run(page).response["violations"]
    context.close()
    serious = [
        (v["id"], [n["html"][:120] for n in v["nodes"][:3]]) for v in found if v["impact"] in ("serious", "critical")
    ]
    assert serious == []


@pytest.mark.slow
@pytest.mark.parametrize("path", sorted(CASES.glob("*.toml")), ids=lambda path: path.stem)
def test_shipped_cases(browser, tmp_path, path):
    from coldseam.case.read import load
    from coldseam.study import run

    run(load(path)).write(tmp_path)
    report = tmp_path / "report.html"
    assert report.stat().st_size <= 5_000_000
    for width in WIDTHS:
        with Opened(browser, report, width).drawn() as opened:
            assert opened.page.evaluate("document.documentElement.scrollWidth") <= width
            assert len(np.unique(opened.pixels().reshape(-1, 3), axis=0)) > 20
            assert opened.quiet(), (opened.asked, opened.wrong)
