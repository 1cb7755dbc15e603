"""The JSON Schema against an independent validator (the jsonschema package)."""

import json
import tomllib

import jsonschema
import pytest
from case_samples import ALL, BOX, CORNER, PANEL

from coldseam.case.schema import json_schema

SCHEMA = json_schema()
CHECKER = jsonschema.Draft202012Validator(SCHEMA)


def test_is_a_schema_and_says_units():
    jsonschema.Draft202012Validator.check_schema(SCHEMA)
    text = json.dumps(SCHEMA, ensure_ascii=False)
    assert '"null"' not in text and '"end"' not in text
    for table in ("Box", "Cylinder", "Within"):  # their key is "from"; [time] and floating have a real key "start"
        assert "start" not in SCHEMA["$defs"][table]["properties"]
    assert "°C" in SCHEMA["$defs"]["Space"]["properties"]["temperature"]["description"]
    assert {"from", "to"} <= set(SCHEMA["$defs"]["Box"]["properties"])


def test_every_amount_has_a_description():
    """Editors show the unit: every property that takes a number and text says what it is."""
    silent = [
        (name, key)
        for name, table in SCHEMA["$defs"].items()
        for key, entry in table.get("properties", {}).items()
        if "anyOf" in entry and {"number", "string"} <= {option.get("type") for option in entry["anyOf"]}
        if not entry.get("description")
    ]
    assert silent == []


@pytest.mark.parametrize("text", ALL.values(), ids=ALL)
def test_good_cases(text):
    CHECKER.validate(tomllib.loads(text))


BAD = [
    (PANEL, "film = 8", "film = 8\nsurface_resistance = 0.1"),
    (PANEL, "film = 8", ""),
    (PANEL, "film = 8", "film = true"),
    (PANEL, "film = 8", "film = -8"),
    (PANEL, "film = 8", 'film = "eight"'),
    (PANEL, "film = 8", "flim = 8"),
    (PANEL, "dimensions = 3", "dimensions = 4"),
    (PANEL, 'title = "Freezer wall panel"', ""),
    (PANEL, "adiabatic = true", "adiabatic = true\nspace = 'bay'"),
    (PANEL, "diameter = 8", "diameter = 8, radius = 4"),
    (PANEL, "count = [2]", "count = [0]"),
    (PANEL, "at = [150, 150, 100]", "at = [150]"),
    (PANEL, 'material = "foam"', ""),
    (PANEL, 'conductivity = "22 mW/mK"', ""),
    (PANEL, "conductivity = 17", "conductivity = 0"),
    (PANEL, "{ plane = { z = 0 }, ", "{ plane = { w = 0 }, "),
    (PANEL, 'on = "rest"', 'on = "remainder"'),
    (PANEL, 'kind = "point"', 'kind = "spot"'),
    (PANEL, '"60 %"', "60"),
    (CORNER, '[["foam", 100]], length = 400', '[["foam"]], length = 400'),
    (BOX, 'face = "+x"', 'face = "x"'),
]


@pytest.mark.parametrize(("text", "old", "new"), BAD)
def test_bad_cases(text, old, new):
    assert old in text
    assert not CHECKER.is_valid(tomllib.loads(text.replace(old, new)))
