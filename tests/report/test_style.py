"""Round values, text, and a colour map that rises evenly in lightness."""

import numpy as np
import pytest

from coldseam.report import style


@pytest.mark.parametrize("low,high", [(-20, 25), (0, 1e-3), (-196, 20), (2.34, 2.47), (19.999, 20.001), (-0.5, 0.3)])
def test_levels_are_round_even_and_inside(low, high):
    levels = style.round_levels(low, high)
    assert 5 <= len(levels) <= 16
    assert np.all((levels > low) & (levels < high))
    steps = np.diff(levels)
    assert np.allclose(steps, steps[0], rtol=1e-6)
    lead = steps[0] / 10 ** np.floor(np.log10(steps[0] * 1.0000001))
    assert min(abs(lead - nice) for nice in (1, 2, 2.5, 5)) < 1e-6
    text = [f"{level:.{style.decimals(levels)}f}" for level in levels]
    assert [float(entry) for entry in text] == pytest.approx(levels.tolist(), abs=1e-12)


def test_even_temperature_has_no_levels():
    assert len(style.round_levels(20.0, 20.0)) == 0
    assert len(style.round_levels(20.0, 20.0 + 1e-9)) == 0
    assert len(style.round_levels(np.nan, 1.0)) == 0


def test_colour_map_rises_evenly_in_lightness():
    """CIE L* (IEC 61966-2-1 for sRGB, from memory) must rise all the way, never twice as fast as on average."""
    import matplotlib

    rgb = matplotlib.colormaps[style.COLOUR_MAP](np.linspace(0, 1, 65))[:, :3]
    linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    bright = linear @ [0.2126, 0.7152, 0.0722]
    lightness = 116 * np.cbrt(bright) - 16
    rise = np.diff(lightness)
    assert rise.min() > 0
    assert rise.max() < 2 * rise.mean()
    assert np.ptp(lightness) > 60


def test_names_are_tamed():
    assert style.plain("a\nb\x00c") == "a b c"
    assert not style.plain("_hidden").startswith("_")
    short = style.shortened("x" * 200, 30)
    assert len(short) == 30 and "…" in short


def test_wrapped_lines_fit():
    text = style.wrapped("Freezer wall panel with through-bolts and an unbearably long title " * 3, 4.0, 8.5, 3)
    assert text.count("\n") <= 2
    assert max(style.text_width(line, 8.5) for line in text.split("\n")) <= 4.0
