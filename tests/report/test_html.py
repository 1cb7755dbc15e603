"""report.html as text: valid, self-contained, the same twice, names shown as typed and never as tags."""

from __future__ import annotations

import base64
import hashlib
import json
import re
import sys
import zlib
from importlib.util import module_from_spec, spec_from_file_location
from pathlib import Path

import numpy as np
import pytest

from coldseam.case.read import load
from coldseam.report import given
from coldseam.report.document import cautions
from coldseam.report.histories import duration, histories
from coldseam.report.markup import Markup, table, tag
from coldseam.report.packing import POSITION_BITS, packed
from coldseam.report.shown import SYSTEMS, Shown

html5lib = pytest.importorskip("html5lib", reason="html5lib comes with scripts/setup (the test extra)")


def load_reports():
    """Return the module that makes reports of the models."""
    name = "coldseam_report_reports"
    if name not in sys.modules:
        spec = spec_from_file_location(name, Path(__file__).with_name("reports.py"))
        sys.modules[name] = module_from_spec(spec)
        spec.loader.exec_module(sys.modules[name])
    return sys.modules[name]


reports = load_reports()

CASES = Path(__file__).parents[2] / "cases"
HOSTILE = {
    "tag": '<script>alert("x")</script><img src=x onerror=alert(1)>',
    "quotes": """it's "quoted" & <b>bold</b> </style></script><!--""",
    "long": "Wand " * 2000 + "!",
    "unbroken": "W" * 10_000,
    "right to left": "جدار المجمد \u202e reversed",
    "emoji": "❄️🔥 Wand 👩‍🔬",
    "control": "a\u0001b\u0085c\ufffed",
}


def parsed(text: str):
    """Return the document; any fault of the HTML standard's parser raises."""
    return html5lib.HTMLParser(strict=True, namespaceHTMLElements=False).parse(text)


def words(element) -> str:
    return "".join(element.itertext())


@pytest.mark.parametrize("kind", HOSTILE)
def test_names_are_shown_as_text(view, tmp_path, kind):
    title = HOSTILE[kind]
    text = reports.report(view("bolted_panel"), tmp_path, title=title).read_text(encoding="utf-8")
    page = parsed(text)
    scripts = page.findall(".//script")
    assert [s.get("type") for s in scripts] == ["application/json", "application/octet-stream", None]
    assert not page.findall(".//b") and not [i for i in page.iter("img") if not i.get("src").startswith("data:")]
    assert not [key for e in page.iter() if isinstance(e.tag, str) for key in e.attrib if key.startswith("on")]
    shown = words(page.find(".//h1"))
    visible = "".join(letter if letter.isprintable() else "\ufffd" for letter in title)
    same = "".join(letter if letter.isprintable() else "\ufffd" for letter in shown)
    assert same.rstrip(" …") == visible[:300].rstrip(" …")
    assert page.find(".//h1/bdi") is not None
    header = json.loads(scripts[0].text)
    assert header["bodies"][0] == f"{title} 0"


def test_the_parser_finds_faults():
    with pytest.raises(html5lib.html5parser.ParseError):
        parsed("<!DOCTYPE html><html><head><title>x</title></head><body><p><table><p>x</b></body></html>")


def test_two_reports_are_identical(view, tmp_path):
    for system in SYSTEMS:
        one, two = (reports.report(view("bolted_panel"), tmp_path / k, system=system).read_bytes() for k in "ab")
        assert one == two


def test_nothing_is_fetched_and_scripts_go_by_digest(view, tmp_path):
    text = reports.report(view("bolted_panel"), tmp_path).read_text(encoding="utf-8")
    page = parsed(text)
    policy = next(m.get("content") for m in page.iter("meta") if m.get("http-equiv"))
    assert "default-src 'none'" in policy and "unsafe" not in policy
    for element, key in (("style", "style-src"), ("script", "script-src")):
        content = [e.text for e in page.iter(element) if e.get("type") is None]
        digest = base64.b64encode(hashlib.sha256(content[0].encode()).digest()).decode()
        assert len(content) == 1 and f"{key} 'sha256-{digest}'" in policy
    links = [e.get("href") for e in page.iter("a")] + [e.get("src") for e in page.iter("img")]
    assert links and all(link.startswith(("#", "data:")) for link in links)
    assert not re.search(r"https?://", re.sub(r"data:[^\"]+", "", text))


def test_chapters_links_and_alt_texts(view, tmp_path):
    page = parsed(reports.report(view("square"), tmp_path).read_text(encoding="utf-8"))
    headings = [words(h) for h in page.iter("h2")]
    assert headings == [
        "Limits", "Warnings of the run", "Heat flows", "Coldest places and moisture", "Pictures", "The model as given",
        "How it was computed", "The case file", "Cautions, and what this does not cover",
    ]  # fmt: skip
    names = {e.get("id") for e in page.iter() if isinstance(e.tag, str)}
    assert all(a.get("href")[1:] in names for a in page.iter("a"))
    assert all(i.get("alt") for i in page.iter("img"))
    assert all(f.find(".//table") is not None for f in page.iter("figure"))
    assert "the bolt sweats first." in words(page)
    assert "1 of 1 limits not met" in words(page.find(".//header"))


def test_the_answer_has_the_digits_of_its_error_in_both_units(view, tmp_path):
    # The model's answers: 1.0 W within 0.9 to 1.1 W; 1 W is 3.412142 Btu/h (Btu_IT 1055.05585262 J, NIST SP 811).
    for system, told in (("metric", "1.0 ± 0.1 W"), ("inch", "3.4 ± 0.4 Btu/h")):
        path = reports.report(view("bolted_panel"), tmp_path / system, system=system)
        assert told in words(parsed(path.read_text(encoding="utf-8")))


@pytest.mark.parametrize(
    ("quantity", "value", "inch"),
    [
        # 1 Btu/(h ft² °F) = 5.678263 W/(m² K); 1 Btu/(h ft °F) = 1.730735 W/(m K); 1 Btu/h = 0.2930711 W;
        # 1 Btu/(h ft²) = 3.154591 W/m²; 1 Btu/(lb °F) = 4186.8 J/(kg K); 1 lb/ft³ = 16.01846 kg/m³ (NIST SP 811, B.9).
        ("film", 5.678263, 1.0),
        ("conductivity", 1.730735, 1.0),
        ("flow", 0.2930711, 1.0),
        ("flux", 3.154591, 1.0),
        ("specific_heat", 4186.8, 1.0),
        ("density", 16.01846, 1.0),
        ("temperature", 37.0, 98.6),
        ("difference", 10.0, 18.0),
        ("length", 25.4, 1.0),
        ("area", 0.09290304, 1.0),
    ],
)
def test_inch_units(quantity, value, inch):
    assert Shown(system="inch").value(quantity, value) == pytest.approx(inch, rel=1e-6)


def test_histories_appear_when_answers_carry_them(view, tmp_path):
    history = {
        "file": "history.csv",
        "steps": 412,
        "events": [
            {"time": 5400.0, "event": "power <lost>"},
            {"time": 93600.0, "event": "limit passed", "temperature": -15.0},
        ],
    }
    page = parsed(reports.report(view("square"), tmp_path, history=history).read_text(encoding="utf-8"))
    section = next(s for s in page.iter("section") if s.get("id") == "histories")
    for told in ("1 h 30 min", "1 d 2 h", "power <lost>", "-15.0 °C", "history.csv", "412"):
        assert told in words(section)
    assert histories({}, tmp_path, Shown()) == ""
    assert duration(59.0) == "59 s"


def test_a_long_case_is_shown_whole(view, tmp_path):
    page = parsed(reports.report(view("square"), tmp_path, title=HOSTILE["long"]).read_text(encoding="utf-8"))
    code = words(next(p for p in page.iter("pre")))
    assert code == reports.case(HOSTILE["long"]).source.text


@pytest.mark.parametrize("path", sorted(CASES.glob("*.toml")), ids=lambda path: path.stem)
def test_every_shipped_case_can_be_told(path):
    # Laws, schedules and floating spaces are told as typed; no solution is needed for that.
    case = load(path)
    shown = Shown(system="inch")
    parts = [given.bodies(case, {}, shown), given.materials(case, shown), given.outside(case, shown), cautions(case)]
    page = parsed(f"<!DOCTYPE html><html><head><title>t</title></head><body>{''.join(parts)}</body></html>")
    told = words(page)
    assert all(name in told for name in (*case.materials, *case.spaces, *(body.name for body in case.body)))


def test_markup_escapes_and_tables_mark_empty_cells():
    assert tag("a", "<", {"title": '"&'}) == '<a title="&quot;&amp;">&lt;</a>'
    assert isinstance(tag("p", "x"), Markup)
    made = table("t", ("a", "b"), [("x", "")])
    assert 'class="none"' in made and table("t", ("a",), []) == ""


def unpacked(header: dict, block: str) -> dict[str, np.ndarray]:
    """Return the arrays of a block as the viewer reads them, written out again from packing.py's description."""
    data, at, arrays = np.frombuffer(zlib.decompress(base64.b64decode(block)), dtype=np.uint8), 0, {}
    for key, entry in header["arrays"].items():
        size = entry["count"] * entry["width"]
        planes = data[at : at + size].reshape(entry["width"], -1).astype(np.int64)
        values = (planes * 256 ** np.arange(entry["width"])[:, None]).sum(axis=0)
        arrays[key] = np.cumsum(values) % 256 ** entry["width"] if entry["delta"] else values
        at += size
    assert at == len(data)
    return arrays


@pytest.mark.parametrize("name", ["bolted_panel", "square", "pipe"])
def test_the_packed_model_is_the_model(view, name):
    model = view(name)
    text, block = packed(model, Shown())
    header = json.loads(text)
    arrays = unpacked(header, block)
    points = np.stack([arrays[f"position{k}"] for k in range(model.mesh.dim)], axis=1)
    points = (np.array(header["origin"]) + points / header["steps"] * header["size"]) * 1e-3
    step = header["size"] * 1e-3 / 2**POSITION_BITS
    field = header["fields"][0]
    temperature = field["low"] + arrays["temperature"] / 65535 * (field["high"] - field["low"])
    # Every node is there with its place and temperature: the nearest of the packed ones is within a step.
    from scipy.spatial import cKDTree

    distance, which = cKDTree(points).query(model.mesh.points)
    assert distance.max() < 2 * step and len(np.unique(which)) == model.mesh.n_nodes
    assert np.abs(temperature[which] - model.temperature).max() < 1e-3
    cells = np.cumsum(np.stack([arrays[f"cell{k}"] for k in range(model.mesh.dim + 1)], axis=1), axis=1)
    mine = {tuple(row) for row in np.sort(which[model.mesh.cells], axis=1).tolist()}
    assert {tuple(row) for row in cells.tolist()} == mine
    if model.mesh.dim == 3:
        facets = np.array([np.delete(cells[f // 4], f % 4) for f in arrays["facet"]])
        wanted = {
            (tuple(row), int(b))
            for row, b in zip(np.sort(which[model.mesh.facets], axis=1).tolist(), model.facet_boundary, strict=True)
        }
        assert {(tuple(row), int(b)) for row, b in zip(facets.tolist(), arrays["boundary"], strict=True)} == wanted
