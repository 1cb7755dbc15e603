"""The CSV tables hold the answers, with units in their headings."""

import csv
import io
import json

from coldseam.report.tables import tables, write_answers


def read(text):
    return list(csv.DictReader(io.StringIO(text)))


def test_boundaries_of_a_cross_section(view):
    rows = read(tables(view("square"))["boundaries.csv"])
    assert [row["boundary"] for row in rows] == ["cold faces", "warm face", "symmetry"]
    assert float(rows[1]["heat_flow_W_per_m"]) == 1.25
    assert float(rows[0]["area_m2_per_m"]) == 0.8  # two sides of 0.4 m, per metre
    assert (rows[2]["kind"], rows[2]["space"]) == ("adiabatic", "")
    assert float(rows[1]["temperature_min_degC"]) == float(
        f"{view('square').temperature[view('square').mesh.facets[view('square').facet_boundary == 1]].min():.9g}"
    )


def test_units_follow_the_dimensions(view):
    assert "heat_flow_W," in tables(view("bolted_panel"))["boundaries.csv"]
    assert "min_at_z_mm" in tables(view("bolted_panel"))["boundaries.csv"]
    assert "heat_flow_W," in tables(view("pipe"))["boundaries.csv"]
    assert "min_at_r_mm,min_at_z_mm" in tables(view("pipe"))["boundaries.csv"]
    assert read(tables(view("square"))["coupling.csv"]) == [
        {"space": "bay", "other_space": "freezer", "coupling_W_per_mK": "0.25"}
    ]


def test_probes_and_bodies(view):
    probes = read(tables(view("square"))["probes.csv"])
    assert probes[0] == {"probe": "bar head", "temperature_degC": "1.5", "x_mm": "200", "y_mm": "0"}
    bodies = read(tables(view("bolted_panel"))["bodies.csv"])
    assert bodies[1] == {"body": "bolt", "material": "bolt", "volume_m3": "0.5", "mean_temperature_degC": "3"}


def test_all_are_written(view, tmp_path):
    written = write_answers(tmp_path, view("square"))
    assert sorted(path.name for path in written) == sorted(path.name for path in tmp_path.iterdir())
    assert json.loads((tmp_path / "answers.json").read_text())["dimensions"] == 2
