"""The page of variants: differences to the first, limits, pictures, names as text."""

from __future__ import annotations

import json

import pytest

from coldseam.errors import CaseError
from coldseam.report.comparison import Variant, letter, write_comparison
from coldseam.report.view import Picture, Table
from coldseam.variants import compare

html5lib = pytest.importorskip("html5lib", reason="html5lib comes with scripts/setup (the test extra)")


def answers(flow: float, met: bool) -> dict:
    return {
        "title": "<i>wall</i>",
        "dimensions": 3,
        "spaces": {"bay": {"heat_flow": flow, "heat_flow_low": flow - 0.1, "heat_flow_high": flow + 0.1}},
        "limits": {"leak": {"value": flow, "unit": "W", "at_most": 12.0, "met": met}},
        "probes": {"head": {"temperature": flow / 2, "at": [0, 0, 0]}},
    }


def page_of(folder):
    text = (folder / "comparison.html").read_text(encoding="utf-8")
    return html5lib.HTMLParser(strict=True, namespaceHTMLElements=False).parse(text)


def rows(page) -> dict[str, list[str]]:
    cells = [["".join(c.itertext()) for c in r if c.tag in ("th", "td")] for r in page.iter("tr")]
    return {row[0]: row[1:] for row in cells}


def test_differences_are_to_the_first(tmp_path):
    from PIL import Image

    Image.new("RGB", (40, 20)).save(tmp_path / "temperature.png")
    shown = Picture(file="temperature.png", title="Temperature", alt="t", table=Table(columns=(), rows=()))
    variants = [
        Variant(name=n, answers=answers(f, f < 12), folder=tmp_path, pictures=(shown,))
        for n, f in (("one", 10.0), ("<b>two", 12.5))
    ]
    write_comparison(variants, tmp_path, "metric", one_scale=True)
    page = page_of(tmp_path)
    found = rows(page)
    assert found["space bay"] == ["A10.0 ± 0.1 W", "B12.5 ± 0.1 W", "B − A+2.50 W"]
    assert found["probe head"] == ["A5.0 °C", "B6.2 °C", "B − A+1.2 K"]
    assert found["leak"] == ["A10.00 W, met", "B12.50 W, not met"]
    assert "10.00 W in A, 12.50 W in B (+25 %)." in "".join(page.find(".//header").itertext())
    assert not list(page.iter("b")) and not list(page.iter("i"))
    assert len(list(page.iter("img"))) == 2


def test_folders_of_finished_runs_are_read(tmp_path):
    for name, flow in (("a", 10.0), ("b", 11.0)):
        (tmp_path / name).mkdir()
        (tmp_path / name / "answers.json").write_text(json.dumps(answers(flow, True)), encoding="utf-8")
    done = compare([tmp_path / "a", tmp_path / "b"], tmp_path / "out", units="inch")
    assert [v.name for v in done.variants] == ["a", "b"]
    # 1 W is 3.412142 Btu/h (NIST SP 811, B.9)
    assert rows(page_of(tmp_path / "out"))["space bay"][2] == "B − A+3.41 Btu/h"


def test_faults_name_what_is_accepted(tmp_path):
    with pytest.raises(CaseError, match="at least two"):
        compare(["one.toml"], tmp_path)
    (tmp_path / "empty").mkdir()
    with pytest.raises(CaseError, match="no answers.json"):
        compare([tmp_path / "empty", tmp_path / "empty"], tmp_path / "out")


def test_letters():
    assert [letter(k) for k in (0, 1, 25, 26)] == ["A", "B", "Z", "A2"]
