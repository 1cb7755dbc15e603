"""The chapters of a report that tell the answers, in the order in which a reviewer asks for them."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from coldseam.report.markup import Markup, joined, name, table, tag, text
from coldseam.report.shown import Shown
from coldseam.report.summary import accuracy_sentence, number

Answers = Mapping[str, Any]
LEAST_SHARE = 5e-4
"""Share of a loss below which a part gets no line of its own."""
TERMS = {
    "parts": "part of the model",
    "by_body": "body",
    "by_film": "film",
    "by_sheet": "sheet",
    "by_contact": "contact",
}
MOST_INPUTS = 8


def answer_sentence(answers: Answers, shown: Shown) -> Markup:
    """Return the answer in one sentence, from the heat flow that is the largest."""
    spaces = answers.get("spaces") or {}
    found = spaces or answers.get("boundaries") or {}
    if not found:
        return Markup("")
    key = max(found, key=lambda one: abs(found[one].get("heat_flow") or 0.0))
    entry = found[key]
    size = abs(entry["heat_flow"])
    ends = sorted(abs(end) for end in (entry.get("heat_flow_low"), entry.get("heat_flow_high")) if end is not None)
    flow = shown.bounded("flow", size, *(ends if len(ends) == 2 else (None, None)))
    does = "loses" if entry["heat_flow"] >= 0 else "takes up"
    if not spaces:
        return joined(["Through the boundary ", name(key), " ", tag("strong", flow), " flow."])
    at = f", at {shown.temperature(entry['temperature'])}," if entry.get("temperature") is not None else ""
    return joined(
        [
            "At the end of the run the space " if answers.get("history") else "The space ",
            name(key),
            at,
            f" {does} ",
            tag("strong", flow),
            _to_the_others(answers, key, shown),
        ]
    )


def _to_the_others(answers: Answers, key: str, shown: Shown) -> Markup:
    others = [(other, entry) for other, entry in answers["spaces"].items() if other != key]
    if len(others) != 1:
        return Markup(".")
    other, entry = others[0]
    return joined([" through this construction; on its other side is ", name(other), " at ",
                   shown.temperature(entry.get("temperature")), "."])  # fmt: skip


def limits_sentence(answers: Answers) -> Markup:
    """Return whether the limits are met, in one sentence."""
    limits = answers.get("limits") or {}
    if not limits:
        return Markup("The case sets no limits.")
    missed = [key for key, entry in limits.items() if not entry["met"]]
    if not missed:
        return tag("strong", "Its limit is met." if len(limits) == 1 else f"All {len(limits)} limits are met.")
    told = joined([name(key) for key in missed], ", ")
    return joined([tag("strong", f"{len(missed)} of {len(limits)} limits not met: "), told, "."])


def limits_table(answers: Answers, shown: Shown) -> Markup:
    """Return the limits with value, bound and verdict."""
    rows = []
    for key, entry in (answers.get("limits") or {}).items():
        bounds = [
            f"{words} {in_unit(entry[bound], entry.get('unit'), shown)}"
            for bound, words in (("at_least", "at least"), ("at_most", "at most"))
            if entry.get(bound) is not None
        ]
        verdict = "met" if entry["met"] else "not met"
        if entry.get("undecided"):
            verdict += " (its error reaches across the bound)"
        value = in_unit(entry["value"], entry.get("unit"), shown, entry.get("low"), entry.get("high"))
        rows.append((name(key), tag("strong" if not entry["met"] else "span", verdict), value, ", ".join(bounds)))
    return table("Limits of the case", ("limit", "verdict", "value", "asked"), rows, (2,))


_UNITS = {"W": "flow", "W/m": "flow_per_m", "°C": "temperature", "K": "difference", "W/K": "coupling",
          "W/(m·K)": "psi", "W/(m²·K)": "film", "W/m²": "flux"}  # fmt: skip


def in_unit(value: float, unit: str | None, shown: Shown, low: float | None = None, high: float | None = None) -> str:
    """Return a limit's value; a unit that has no inch counterpart stays."""
    quantity = _UNITS.get(unit or "")
    if quantity is None:
        return f"{number(value)} {unit or ''}".strip()
    if low is not None and high is not None:
        return shown.bounded(quantity, value, low, high)
    return shown.temperature(value) if quantity == "temperature" else shown.amount(quantity, value)


def flows(answers: Answers, shown: Shown) -> Markup:
    """Return heat flows of spaces and boundaries with errors, the coupling, the accuracy and the balance."""
    rows = [
        ("space", name(key), _flow(entry, shown), shown.temperature(entry.get("temperature")), "", _kind(entry))
        for key, entry in (answers.get("spaces") or {}).items()
    ]
    rows += [
        ("boundary", name(key), _flow(entry, shown), shown.temperature((entry.get("temperature") or {}).get("mean")),
         shown.amount("area", entry.get("area")), _kind(entry))
        for key, entry in (answers.get("boundaries") or {}).items()
        if entry.get("kind") != "adiabatic"
    ]  # fmt: skip
    rows = [(tag("span", [kind, " ", key]), *rest) for kind, key, *rest in rows]
    columns = ("from", "heat flow", "temperature (a surface's mean)", "area", "kind of error")
    return joined([
        tag("p", [
                    "These are the flows at the end of the run. " if answers.get("history") else "",
                    "A flow is positive into the solid. The error covers the numerical solution of the model as given.",
                ]),
        table("Heat flows", columns, rows, (1, 2, 3)),
        _coupling(answers, shown),
        _trust(answers, shown),
    ])  # fmt: skip


def _flow(entry: Answers, shown: Shown) -> str:
    return shown.bounded("flow", entry.get("heat_flow"), entry.get("heat_flow_low"), entry.get("heat_flow_high"))


def _kind(entry: Answers) -> str:
    return {"guaranteed": "guaranteed interval", "estimate": "estimate"}.get(entry.get("interval", ""), "")


def _coupling(answers: Answers, shown: Shown) -> Markup:
    intervals = answers.get("coupling_intervals") or {}
    rows: dict[frozenset[str], tuple] = {}
    for one, others in (answers.get("coupling") or {}).items():
        for other, value in others.items():
            if one != other and frozenset((one, other)) not in rows:
                low, high = intervals.get(one, {}).get(other, (None, None))
                pair = joined([name(one), " – ", name(other)])
                rows[frozenset((one, other))] = (pair, shown.bounded("coupling", value, low, high))
    told = (answers.get("solver") or {}).get("linearised")
    title = "Thermal coupling coefficients" + (f" (linearised: {told})" if told else "")
    return table(title, ("between", "coefficient"), list(rows.values()), (1,))


def _trust(answers: Answers, shown: Shown) -> Markup:
    told = []
    accuracy = answers.get("accuracy")
    if accuracy:
        entries = [*(answers.get("spaces") or {}).values(), *(answers.get("boundaries") or {}).values()]
        told.append(accuracy_sentence(accuracy, entries) + ".")
    balance = answers.get("balance")
    if balance:
        closure = f"{_tiny(shown.measure('flow').factor * balance['closure'])} {shown.unit('flow')}"
        told.append(f"Balance: all heat flows add up to {closure}, {_tiny(balance['relative'])} of what flows through.")
    return joined([tag("p", sentence) for sentence in told])


def _tiny(value: float) -> str:
    return f"{value:.1e}" if value else "0"


def losses(answers: Answers, shown: Shown) -> Markup:
    """Return where every space's heat goes, the bridges, the enclosures, and what the flows react to."""
    found = answers.get("losses") or {}
    kept = _told(found)
    mirrored = joined([name(key) for key in found if key not in kept], ", ")
    parts = [_loss(key, entry, answers, shown) for key, entry in kept.items()]
    same = tag("p", ["For space ", mirrored, " the same parts hold, with the opposite sign."]) if mirrored else ""
    return joined([*parts, same, _bridges(answers, shown), _enclosures(answers, shown)])


def _told(found: Mapping[str, Answers]) -> dict[str, Answers]:
    """Return the spaces whose losses are told: of two that give and take the same, the one that gives."""
    if len(found) == 2:
        (one, gives), (other, takes) = sorted(found.items(), key=lambda pair: -(pair[1].get("heat_flow") or 0.0))
        total = (gives.get("heat_flow") or 0.0) + (takes.get("heat_flow") or 0.0)
        if gives.get("heat_flow") and abs(total) <= 1e-6 * abs(gives["heat_flow"]):
            return {one: gives}
    return dict(found)


def _loss(space: str, entry: Answers, answers: Answers, shown: Shown) -> Markup:
    if not entry.get("heat_flow"):
        return Markup("")
    terms = [(kind, key, part) for kind in TERMS for key, part in (entry.get(kind) or {}).items()]
    terms.sort(key=lambda term: (term[0] != "parts", -abs(term[2]["heat_flow"])))
    rows = [
        (name(key), TERMS[kind], shown.amount("flow", part["heat_flow"], 3), f"{100 * part['share']:.1f} %")
        for kind, key, part in terms
        if part.get("share") is not None and abs(part["share"]) >= LEAST_SHARE
    ]
    sources = entry.get("from_heat_sources") or {}
    if sources.get("share") and abs(sources["share"]) >= LEAST_SHARE:
        rows.append(
            ("heat sources", "", shown.amount("flow", sources["heat_flow"], 3), f"{100 * sources['share']:.1f} %")
        )
    caption = joined(["Where the heat of space ", name(space), " goes"])
    return joined([
        table(caption, ("what", "kind", "heat flow", "share"), rows, (2, 3)),
        _reactions(space, (answers.get("sensitivities") or {}).get(space) or {}, shown),
    ])  # fmt: skip


def _reactions(space: str, entry: Answers, shown: Shown) -> Markup:
    rows = [
        (name(reaction["input"]),
         f"{reaction['relative']:+.2g} %",
         f"± {100 * reaction['change']:.2g} %" if reaction.get("change_stated") else "not stated")
        for reaction in (entry.get("ranked") or ())[:MOST_INPUTS]
        if reaction.get("relative") is not None and abs(reaction["relative"]) >= LEAST_SHARE
    ]  # fmt: skip
    caption = joined(["What the heat flow of space ", name(space), " reacts to"])
    interval = entry.get("interval") or {}
    told = Markup("")
    if interval.get("stated") and interval.get("heat_flow_low") is not None:
        span = (
            f"{shown.amount('flow', interval['heat_flow_low'])} to {shown.amount('flow', interval['heat_flow_high'])}"
        )
        told = tag("p", f"With every stated uncertainty off the worst way at once the flow lies within {span}.")
    return joined([table(caption, ("input", "1 % more of it makes", "its uncertainty"), rows, (1, 2)), told])


def _bridges(answers: Answers, shown: Shown) -> Markup:
    rows = []
    for key, entry in (answers.get("bridges") or {}).items():
        for symbol, quantity, kind in (
            ("psi", "psi", "linear"),
            ("psi_external", "psi", "linear"),
            ("chi", "coupling", "point"),
        ):
            if isinstance(entry.get(symbol), int | float):
                point = Shown(system=shown.system)  # chi is per piece, in any kind of model
                value = point.bounded(quantity, entry[symbol], entry.get(f"{symbol}_low"), entry.get(f"{symbol}_high"))
                between = joined([name(one) for one in entry.get("between", ())], " – ")
                letter = {"psi": "ψ", "psi_external": "ψ, outside lengths", "chi": "χ"}[symbol]
                rows.append((name(key), kind, letter, value, between))
    return table("Thermal bridges", ("bridge", "kind", "symbol", "transmittance", "between"), rows, (3,))


def _enclosures(answers: Answers, shown: Shown) -> Markup:
    rows = []
    for key, entry in (answers.get("enclosures") or {}).items():
        if entry.get("K") is None:
            continue
        k = shown.bounded("film", entry["K"], entry.get("K_low"), entry.get("K_high"))
        areas = f"{shown.amount('area', entry['inside_area'])}, {shown.amount('area', entry['outside_area'])}"
        share = f"{100 * entry['edges_and_corners_share']:.1f} %" if "edges_and_corners_share" in entry else ""
        rows.append((name(key), shown.bounded("coupling", entry["leak"], entry.get("leak_low"), entry.get("leak_high")),
                     k, areas, share))  # fmt: skip
    columns = ("enclosure", "leak", "K", "area inside, outside", "through edges, corners and details")
    return table("Enclosures", columns, rows, (1, 2))


def coldest(answers: Answers, shown: Shown) -> Markup:
    """Return the coldest and warmest place of each surface, its moisture, and the probes."""
    surfaces = answers.get("surfaces") or {}
    found = [(key, entry["temperature"]) for key, entry in (answers.get("boundaries") or {}).items()
             if entry.get("kind") != "adiabatic" and entry.get("temperature")]  # fmt: skip
    found.sort(key=lambda pair: pair[1]["min"])
    rows = [
        (name(key), shown.temperature(ends["min"]), shown.place(ends.get("min_at")), shown.temperature(ends["max"]),
         shown.place(ends.get("max_at")))
        for key, ends in found
    ]  # fmt: skip
    columns = ("surface", "coldest", "at", "warmest", "at ")
    moist = [_moisture(key, entry, shown) for key, entry in surfaces.items() if entry.get("moisture")]
    probes = [(name(key), shown.temperature(entry.get("temperature")), shown.place(entry.get("at")))
              for key, entry in (answers.get("probes") or {}).items()]  # fmt: skip
    return joined([
        table("Surface temperatures, the coldest surface first", columns, rows, (1, 3)),
        table("Moisture at the coldest place of each surface",
              ("surface", "temperature factor f_Rsi", "verdict", "dew or frost point", "air humidity at the surface"),
              moist, (1, 3, 4)),
        table("Probes", ("probe", "temperature", "at"), probes, (1,)),
    ])  # fmt: skip


def _moisture(key: str, entry: Answers, shown: Shown) -> tuple:
    found = entry["moisture"]
    factor = (entry.get("f_Rsi") or {}).get("value")
    over_ice = found["saturation_over"] == "ice"
    margin = found["margin_condensation_kelvin"]
    if margin < 0:
        verdict = joined([tag("strong", "frosts" if over_ice else "sweats"),
                          f", {shown.difference(-margin)} below, ",
                           f"on {100 * found['share_condensation']:.2g} % of its area"])  # fmt: skip
    elif found["margin_mould"] < 0:
        verdict = joined([tag("strong", "mould can grow"), f" on {100 * found['share_mould']:.2g} % of its area; "
                          f"{shown.difference(margin)} above"])  # fmt: skip
    else:
        verdict = text(f"stays dry, {shown.difference(margin)} above")
    point = f"{'frost' if over_ice else 'dew'} point {shown.temperature(found['saturation'])}"
    humidity = f"{100 * found['surface_humidity']:.0f} %" if found["surface_humidity"] <= 1 else "100 % (saturated)"
    return name(key), "" if factor is None else f"{factor:.3f}", verdict, point, humidity


def moisture_sentence(answers: Answers, shown: Shown) -> Markup:
    """Return where surfaces sweat, frost over or can grow mould, in one sentence; empty where none does or none is judged."""
    wet: dict[str, list[str]] = {}
    for key, entry in (answers.get("surfaces") or {}).items():
        found = entry.get("moisture")
        if found and found["margin_condensation_kelvin"] < 0:
            wet.setdefault("frosts over" if found["saturation_over"] == "ice" else "sweats", []).append(key)
        elif found and found["margin_mould"] < 0:
            wet.setdefault("can grow mould", []).append(key)
    told = []
    for does, keys in wet.items():
        for key in keys:
            ends = (answers.get("boundaries") or {}).get(key, {}).get("temperature") or {}
            at = f" ({shown.temperature(ends['min'])})" if "min" in ends else ""
            told.append(joined([name(key), " ", tag("strong", does), f" at its coldest place{at}"]))
    return joined(["Moisture: ", joined(told, "; "), "."]) if told else Markup("")


def warnings(answers: Answers) -> Markup:
    """Return the warnings of the run as a list."""
    told = answers.get("warnings") or ()
    return tag("ul", [tag("li", sentence) for sentence in told], {"class": "warnings"}) if told else Markup("")
