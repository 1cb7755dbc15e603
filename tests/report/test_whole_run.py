"""A whole run through the command line, pictures included: the same twice, and safe from whatever a name may hold."""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pytest

html5lib = pytest.importorskip("html5lib", reason="html5lib comes with scripts/setup (the test extra)")

LONG = "W" * 10_000
NAMES = {
    "title": '</title><script>alert("t")</script> ' + LONG,
    "space": "\"quoted\" & 'single' <b>room</b>",
    "other": "جدار المجمد \u202e reversed",
    "material": "❄️🔥 <img src=x onerror=alert(1)>",
    "body": "</style></script><!-- $x^2$ \\frac",
    "boundary": "_hidden " + LONG,
    "far": "=1+1|'far'",
}
CASE = """\
title = {title}
[model]
dimensions = 2
accuracy = "5 %"
[spaces.{space}]
temperature = 20
relative_humidity = "60 %"
film = 8
[spaces.{other}]
temperature = -20
film = 8
[materials.{material}]
conductivity = 0.03
source = {title}
[[body]]
name = {body}
material = {material}
polygon = {{ points = [[0, 0], [200, 0], [200, 100], [100, 100], [100, 200], [0, 200]] }}
[[boundary]]
name = {boundary}
on = {{ plane = {{ x = 0 }} }}
space = {space}
[[boundary]]
name = {far}
on = "rest"
space = {other}
[[probe]]
name = {boundary}
at = [0, 100]
"""


def quoted(text: str) -> str:
    return json.dumps(text, ensure_ascii=False)


@pytest.fixture(scope="module")
def runs(tmp_path_factory) -> list[Path]:
    """Folders of two runs of one case in processes of their own, whose sets and dictionaries are ordered differently."""
    folder = tmp_path_factory.mktemp("runs")
    (folder / "case.toml").write_text(
        CASE.format(**{key: quoted(text) for key, text in NAMES.items()}), encoding="utf-8"
    )
    outs = [folder / "one", folder / "another place"]
    started = [
        subprocess.Popen(
            [sys.executable, "-m", "coldseam", "run", str(folder / "case.toml"), "--out", str(out)],
            env={**os.environ, "PYTHONPATH": os.pathsep.join(sys.path), "PYTHONHASHSEED": str(seed)},
            stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, text=True,
        )
        for seed, out in enumerate(outs, 1)
    ]  # fmt: skip
    for process in started:
        errors = process.communicate(timeout=300)[1]
        assert process.returncode == 0, errors[-2000:]
    return outs


def test_two_runs_leave_the_same_files(runs):
    one, two = ({file.name: _without_seconds(file.read_bytes()) for file in out.iterdir()} for out in runs)
    assert {"report.html", "answers.json", "boundaries.csv", "temperature.svg", "model.png"} <= set(one)
    assert sorted(one) == sorted(two)
    assert [name for name in one if one[name] != two[name]] == []


def _without_seconds(content: bytes) -> bytes:
    """Return a file without how long the rounds took, all that may differ."""
    return re.sub(rb'"seconds": [0-9.e-]+|<span class="time">[^<]*</span>', b"", content)


def test_whatever_a_name_holds_stays_text(runs):
    text = (runs[0] / "report.html").read_text(encoding="utf-8")
    page = html5lib.HTMLParser(strict=True, namespaceHTMLElements=False).parse(text)
    assert [s.get("type") for s in page.iter("script")] == ["application/json", "application/octet-stream", None]
    assert not list(page.iter("b")) and all(i.get("src").startswith("data:") for i in page.iter("img"))
    words = "".join(page.itertext())
    for key in ("space", "material", "body", "far"):
        assert NAMES[key] in words
    answers = json.loads((runs[0] / "answers.json").read_text(encoding="utf-8"))
    assert answers["title"] == NAMES["title"] and set(answers["spaces"]) == {NAMES["space"], NAMES["other"]}
    assert answers["warnings"] == []


def test_pictures_with_any_name_are_whole_and_of_common_size(runs):
    from PIL import Image

    files = sorted(runs[0].glob("*.png"))
    assert {"model.png", "temperature.png", "heat_flow.png", "surface_1.png"} <= {file.name for file in files}
    for file in files:
        image = np.asarray(Image.open(file).convert("L"))
        assert max(image.shape) < 2000 and image.std() > 5  # a name of 10 000 letters does not stretch a page
        edge = np.concatenate([image[:, :3].ravel(), image[:, -3:].ravel(), image[:3].ravel(), image[-3:].ravel()])
        assert edge.min() > 250  # and nothing runs over its edge
        drawn = file.with_suffix(".svg").read_text(encoding="utf-8")
        assert not re.search(r"<script|onerror|<b>", drawn)
        ElementTree.fromstring(drawn)


@pytest.mark.parametrize("letter", ["\n", "\x01", "\x1b[31m", "\u0085", "\u2028"])
def test_control_characters_are_refused_where_they_stand(tmp_path, letter, capsys):
    from coldseam.cli import main

    named = NAMES | {"title": "a wall", "body": f"front{letter}panel", "boundary": "warm"}
    case = tmp_path / "case.toml"
    text = CASE.format(**{key: json.dumps(value, ensure_ascii=key == "body") for key, value in named.items()})
    case.write_text(text, encoding="utf-8")
    assert main(["run", str(case), "--out", str(tmp_path / "out")]) == 2
    errors = capsys.readouterr().err
    assert "body[1].name" in errors and "control characters" in errors
