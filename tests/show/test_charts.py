"""Pictures: what is drawn is what the run holds, named with units, and nothing lies on text."""

import subprocess
import sys
from collections.abc import Iterator
from itertools import combinations
from math import log, nan, sqrt
from pathlib import Path
from xml.etree import ElementTree

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.collections import QuadMesh
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.patches import StepPatch
from matplotlib.text import Annotation, Text

from sonoyield import Protocol
from sonoyield.collapse import equations as eq
from sonoyield.collapse.aqueous import CAUGHT, aqueous_chemistry
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.film_cycles import FilmCycle
from sonoyield.collapse.follow import at_rest
from sonoyield.collapse.history import CellRecord, History
from sonoyield.describe.scavengers import Scavenger
from sonoyield.expose.estimate import bubble_of, liquid_of
from sonoyield.show import charts, files, profile

CELLS, STEPS, PEAK = 4, 401, 200
SPREAD = 2e-9  # s, standard deviation of the made-up peak
FRESH = {"caught by probe": 3e5, "becomes H2O2": 5.5e5, "diffuses away": 1.5e5}


@pytest.fixture(scope="module")
def bubble() -> Bubble:
    protocol = Protocol.from_dict(
        {
            "drive": {"frequency": "355 kHz", "pressure": "2 bar"},
            "schedule": {"duration": "1 min"},
            "liquid": {"temperature": "25 degC", "volume": "100 mL"},
            "gas": {"mixture": "argon"},
            "bubbles": {"radius": "3 um", "number_density": "1e7 / m^3"},
        }
    )
    return bubble_of(protocol, liquid_of(protocol))


def made_up(bubble: Bubble, resolved: bool, heat: float = 5000.0, most: float = 0.04) -> History:
    """A bell of temperature in time, hottest in the centre, OH in step with it."""
    times = 1e-6 + SPREAD * np.linspace(-10.0, 10.0, STEPS)
    bell = np.exp(-0.5 * ((times - times[PEAK]) / SPREAD) ** 2)
    share = np.diff(np.linspace(0.0, 1.0, CELLS + 1) ** 2)
    rise = np.linspace(1.3, 0.2, CELLS)
    rise /= rise @ share
    rest = bubble.liquid.temperature
    temperature = rest + heat * bell[:, None] * rise
    moles = np.multiply.outer(np.ones(STEPS), np.outer(share, bubble.moles))
    oh = bubble.phase.index("OH")
    moles[..., oh] = most * bell[:, None] * rise * share * bubble.moles.sum()
    states = np.tile(bubble.at_rest(), (STEPS, 1))
    states[:, eq.RADIUS] = 3e-6 - 2e-6 * bell
    amounts = moles.sum(axis=2)
    states[:, eq.TEMPERATURE] = (amounts * temperature).sum(axis=1) / amounts.sum(axis=1)
    states[:, eq.MOLES : eq.MOLES + moles.shape[2]] = moles.sum(axis=1)
    cells = CellRecord(np.append(0.0, np.cumsum(share)), temperature, moles)
    return History(bubble, times, states, (0,), cells=cells if resolved else None)


@pytest.fixture(scope="module")
def resolved(bubble: Bubble) -> History:
    return made_up(bubble, resolved=True)


@pytest.fixture(scope="module")
def mixed(bubble: Bubble) -> History:
    return made_up(bubble, resolved=False)


def window(history: History, axes: Axes) -> np.ndarray:
    """Rows that a picture shows; a bell is 2 sqrt(2 ln 2) spreads wide at half its height."""
    drawn = np.asarray(axes.lines[0].get_xdata())
    rows = np.arange(len(drawn)) - int(np.searchsorted(drawn, -1e-9)) + PEAK
    from_peak = history.times - history.times[PEAK]
    assert drawn == pytest.approx(1e9 * from_peak[rows], rel=1e-9, abs=1e-9)
    width = 2.0 * sqrt(2.0 * log(2.0)) * SPREAD
    # Half the height is sought on steps: the width is up to two too large.
    step = SPREAD * 20.0 / (STEPS - 1)
    assert -from_peak[rows[0]] == pytest.approx(charts.BEFORE * (width + step), abs=2.5 * step)
    assert from_peak[rows[-1]] == pytest.approx(charts.AFTER * (width + step), abs=3.5 * step)
    return rows


def meshes(axes: Axes) -> list[QuadMesh]:
    return [one for one in axes.collections if isinstance(one, QuadMesh)]


def steps(axes: Axes) -> list[StepPatch]:
    return [one for one in axes.patches if isinstance(one, StepPatch)]


def panels(figure: Figure) -> list[Axes]:
    return [one for one in figure.axes if one.get_label() != "<colorbar>"]


def texts(figure: Figure) -> Iterator[Text]:
    """All that is written inside the limits of its axis."""
    hidden = set()
    for axes in figure.axes:
        for axis in (axes.xaxis, axes.yaxis):
            low, high = sorted(axis.get_view_interval())
            room = 1e-9 * (high - low)
            for tick in [*axis.get_major_ticks(), *axis.get_minor_ticks()]:
                if not low - room <= tick.get_loc() <= high + room:
                    hidden |= {tick.label1, tick.label2}
    for one in figure.findobj(Text):
        assert isinstance(one, Text)
        if one.get_visible() and one.get_text().strip() and one not in hidden:
            yield one


def check_texts(figure: Figure) -> None:
    """Every text lies within the picture and on no other text."""
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    whole = figure.bbox.padded(1.0)
    boxes = [(one.get_text(), one.get_window_extent()) for one in texts(figure)]
    assert len(boxes) > 5
    for text, box in boxes:
        assert whole.x0 <= box.x0 <= box.x1 <= whole.x1, text
        assert whole.y0 <= box.y0 <= box.y1 <= whole.y1, text
    for (one, a), (other, b) in combinations(boxes, 2):
        assert not a.padded(-1.0).overlaps(b.padded(-1.0)), (one, other)


def check_finite(figure: Figure) -> None:
    for axes in figure.axes:
        for line in axes.lines:
            assert np.isfinite(np.asarray(line.get_data(), dtype=float)).all()
        for mesh in meshes(axes):
            assert np.isfinite(np.ma.filled(mesh.get_array(), nan)).all()
            assert np.isfinite(mesh.get_coordinates()).all()
        for step in steps(axes):
            assert np.isfinite(step.get_data().values).all()
        assert np.isfinite([*axes.get_xlim(), *axes.get_ylim()]).all()


def test_maps_show_the_cells(resolved: History) -> None:
    heat, _, share, _ = panels(charts.collapse_chart(resolved))
    rows, oh = window(resolved, heat), resolved.bubble.phase.index("OH")
    assert resolved.cells is not None
    moles = resolved.cells.moles[rows]
    fraction = 100.0 * moles[..., oh] / moles.sum(axis=2)
    for axes, values in ((heat, resolved.cells.temperature[rows]), (share, fraction)):
        (mesh,) = meshes(axes)
        drawn = np.asarray(mesh.get_array()).reshape(len(rows), CELLS)
        assert drawn == pytest.approx(values, rel=1e-12)
        corners = np.asarray(mesh.get_coordinates())
        wall_at = 1e6 * resolved.radius[rows]
        half_way = 0.5 * (wall_at[1:] + wall_at[:-1])  # a patch reaches half way to the next step
        assert corners[1:-1, -1, 1] == pytest.approx(half_way, rel=1e-12)
        assert (corners[:, 0, 1] == 0.0).all()
        assert (np.diff(corners[..., 1], axis=1) > 0.0).all()
        assert (np.diff(corners[..., 0], axis=0) > 0.0).all()
        wall = axes.lines[0]
        from_peak = 1e9 * (resolved.times[rows] - resolved.times[PEAK])
        assert np.asarray(wall.get_xdata()) == pytest.approx(from_peak, rel=1e-12, abs=1e-9)
        assert np.asarray(wall.get_ydata()) == pytest.approx(wall_at, rel=1e-12)
        assert axes.get_xlim() == (from_peak[0], from_peak[-1])


def test_profiles_show_the_cells_before_at_and_after_the_peak(resolved: History) -> None:
    figure = charts.collapse_chart(resolved)
    heat, share = panels(figure)[1], panels(figure)[3]
    half = sqrt(2.0 * log(2.0)) * SPREAD
    beyond = int(np.ceil(half / (SPREAD * 20.0 / (STEPS - 1))))
    gas = profile.shells(resolved, slice(0, STEPS))
    for axes, values in (
        (heat, gas.temperature),
        (share, 100.0 * gas.fraction(resolved.bubble.phase.index("OH"))),
    ):
        for row, step in zip((PEAK - beyond, PEAK, PEAK + beyond), steps(axes), strict=True):
            drawn = step.get_data()
            assert np.asarray(drawn.values) == pytest.approx(values[row], rel=1e-12)
            edges = np.asarray(drawn.edges)
            assert edges == pytest.approx(gas.faces[row] / resolved.radius[row], rel=1e-12)
            assert edges[0] == 0.0 and edges[-1] == 1.0
    legend = heat.get_legend()
    assert legend is not None
    named = [one.get_text() for one in legend.get_texts()]
    assert named == [f"−{beyond * 0.1:.3g} ns", "peak", f"+{beyond * 0.1:.3g} ns"]


def test_lines_of_a_mixed_gas(mixed: History) -> None:
    radius, heat, share = panels(charts.collapse_chart(mixed))
    rows, oh = window(mixed, radius), mixed.bubble.phase.index("OH")
    from_peak = 1e9 * (mixed.times[rows] - mixed.times[PEAK])
    fraction = 100.0 * mixed.moles[rows, oh] / mixed.moles[rows].sum(axis=1)
    for axes, values in (
        (radius, 1e6 * mixed.radius[rows]),
        (heat, mixed.temperature[rows]),
        (share, fraction),
    ):
        assert np.asarray(axes.lines[0].get_xdata()) == pytest.approx(from_peak, abs=1e-9)
        assert np.asarray(axes.lines[0].get_ydata()) == pytest.approx(values, rel=1e-12)


def test_labels_with_units(resolved: History, mixed: History) -> None:
    figure = charts.collapse_chart(resolved)
    heat, across, share, across_share = panels(figure)
    assert heat.get_ylabel() == share.get_ylabel() == "distance from centre (µm)"
    assert share.get_xlabel() == "time from the peak (ns)"
    assert across.get_ylabel() == "temperature (K)"
    assert across_share.get_ylabel() == "OH mole fraction (%)"
    assert across_share.get_xlabel() == "distance from centre / radius of bubble"
    bars = [one.get_ylabel() for one in figure.axes if one.get_label() == "<colorbar>"]
    assert bars == ["temperature (K)", "OH mole fraction (%)"]
    lines = panels(charts.collapse_chart(mixed))
    assert [one.get_ylabel() for one in lines] == [
        "radius (µm)", "temperature (K)", "OH mole fraction (%)",
    ]  # fmt: skip
    assert lines[-1].get_xlabel() == "time from the peak (ns)"
    (bars_axes,) = panels(charts.liquid_chart(FRESH))
    assert bars_axes.get_xlabel() == "share of the OH in the liquid (%)"


@pytest.mark.parametrize("cells", [True, False])
@pytest.mark.parametrize(("heat", "most"), [(5000.0, 0.04), (3.0, 0.0), (900.0, 3e-9)])
def test_readable_and_finite_also_when_there_is_little(
    bubble: Bubble, cells: bool, heat: float, most: float
) -> None:
    figure = charts.collapse_chart(made_up(bubble, cells, heat, most))
    check_texts(figure)
    check_finite(figure)
    wanted = "%" if most > 1e-4 else "ppm"
    assert any(f"OH mole fraction ({wanted})" in one.get_ylabel() for one in figure.axes)
    for axes in figure.axes:
        if "OH" in axes.get_ylabel():
            assert axes.get_ylim()[0] == 0.0


def test_a_bubble_at_rest_is_drawn_whole(bubble: Bubble) -> None:
    history = at_rest(bubble)
    figure = charts.collapse_chart(history)
    check_texts(figure)
    check_finite(figure)
    times = np.asarray(figure.axes[0].lines[0].get_xdata())
    assert times == pytest.approx(1e6 * history.times)  # in us
    assert figure.axes[-1].get_xlabel() == "time from the peak (µs)"


def test_shares_of_one_and_of_two() -> None:
    repeating = {"caught by probe": 1e5, "ends as O2 or HO2": 2e5, "becomes H2O2": 7e5}
    (axes,) = panels(charts.liquid_chart(FRESH))
    assert [bar.get_width() for bar in axes.patches] == pytest.approx([30.0, 55.0, 15.0])
    (axes,) = panels(figure := charts.liquid_chart(FRESH, repeating))
    names = [one.get_text() for one in axes.get_yticklabels()]
    assert names == ["caught by probe", "becomes H2O2", "diffuses away", "ends as O2 or HO2"]
    widths = [bar.get_width() for bar in axes.patches]
    assert widths == pytest.approx([30.0, 55.0, 15.0, 0.0, 10.0, 70.0, 0.0, 20.0])
    written = [one.get_text() for one in axes.texts]
    assert written == ["30 %", "55 %", "15 %", "0", "10 %", "70 %", "0", "20 %"]
    named = [one.get_text() for one in figure.legends[0].get_texts()]
    assert named == [
        r"fresh liquid: $1.00\times10^{6}$ OH a cycle",
        r"repeating cycles: $1.00\times10^{6}$ OH a cycle",
    ]
    check_texts(figure)


def test_many_fates_little_ones_and_none() -> None:
    """As many scavengers as a protocol may hold, a share below 0.01 per cent, and nothing."""
    many = {f"caught by scavenger-{k}": 10.0 ** (7 - k) for k in range(8)}
    many |= {"nitrite_and_nitrate": -4.0, "diffuses away": 0.0}
    (axes,) = panels(figure := charts.liquid_chart(many, FRESH))
    written = [one.get_text() for one in axes.texts]
    assert "< 0.01 %" in written
    assert min(one.xy[0] for one in axes.texts if isinstance(one, Annotation)) == 0.0
    assert axes.get_yticklabels()[8].get_text() == "nitrite and nitrate"
    check_texts(figure)
    for nothing in ({}, {"becomes H2O2": 0.0}):
        (axes,) = panels(figure := charts.liquid_chart(nothing))
        assert [bar.get_width() for bar in axes.patches] == [0.0] * len(nothing)
        assert axes.get_xlim() == (0.0, 100.0)
        assert figure.legends[0].get_texts()[0].get_text() == "fresh liquid: no OH a cycle"
        check_texts(figure)


@pytest.mark.parametrize("value", [nan, float("inf")])
def test_no_picture_of_what_is_no_number(value: float) -> None:
    with pytest.raises(ValueError, match="becomes H2O2"):
        charts.liquid_chart(FRESH, {"becomes H2O2": value})


def cycle(nitrogen: bool) -> FilmCycle:
    """Every reaction that takes OH takes another number of it."""
    chemistry = aqueous_chemistry(298.15, {"probe": Scavenger(4e6, 1.0)}, nitrogen=nitrogen)
    takes = chemistry.stoichiometry()[:, chemistry.index("OH")] < 0.0
    names = [name for name, one in zip(chemistry.reactions, takes, strict=True) if one]
    oh = {name: float(2**k) for k, name in enumerate(names)}
    none = dict.fromkeys(chemistry.species, 0.0)
    caught = oh[f"OH + probe -> {CAUGHT}probe"]
    away, kept = none | {"OH": 0.25}, none | {"OH": 0.125}
    return FilmCycle(none, none, away, kept, {"probe": caught}, oh, 0.0)


@pytest.mark.parametrize("nitrogen", [True, False])
def test_each_oh_has_one_fate(nitrogen: bool) -> None:
    """Against the sums that ``FilmCycle`` makes of the same counts by itself."""
    one = cycle(nitrogen)
    fate = charts.oh_fate(one)
    assert sum(fate.values()) == sum(one.oh.values()) + 0.375
    assert fate["caught by probe"] == one.caught["probe"]
    assert fate["becomes H2O2"] == one.oh["OH + OH -> H2O2"]
    assert fate["recombines to water"] + fate["ends as O2 or HO2"] == one.lost
    assert fate["recombines to water"] == one.oh["H + OH ->"] + one.oh["OH + H2 -> H"]
    assert fate["diffuses away"] == 0.375
    assert ("nitrite, nitrate" in fate) == nitrogen
    if nitrogen:
        acids = ("OH + NO -> HNO2", "OH + NO2 -> ONOOH", "OH + NO2- -> NO2", "OH + HNO2 -> NO2")
        assert fate["nitrite, nitrate"] == sum(one.oh[name] for name in acids)


def test_written_as_svg_and_png(resolved: History, tmp_path: Path) -> None:
    figure = charts.collapse_chart(resolved)
    for suffix in files.CHART_SUFFIXES:
        charts.write_chart(figure, tmp_path / f"c{suffix}")
    root = ElementTree.parse(tmp_path / "c.svg").getroot()
    assert root.tag == "{http://www.w3.org/2000/svg}svg"
    assert len(list(root.iter("{http://www.w3.org/2000/svg}image"))) >= 2  # maps as pixels
    assert (tmp_path / "c.png").read_bytes()[:8] == b"\x89PNG\r\n\x1a\n"
    assert sorted(one.name for one in tmp_path.iterdir()) == ["c.png", "c.svg"]
    with pytest.raises(ValueError, match=r"allowed \.png, \.svg"):
        charts.write_chart(figure, tmp_path / "c.pdf")


def test_the_same_picture_whatever_the_user_has_set(mixed: History, tmp_path: Path) -> None:
    charts.write_chart(charts.collapse_chart(mixed), tmp_path / "a.svg")
    with mpl.rc_context({"font.size": 30.0, "lines.linewidth": 9.0, "svg.fonttype": "none"}):
        charts.write_chart(charts.collapse_chart(mixed), tmp_path / "b.svg")
        assert mpl.rcParams["font.size"] == 30.0
    assert (tmp_path / "a.svg").read_bytes() == (tmp_path / "b.svg").read_bytes()


def test_failing_write_keeps_the_picture_that_was(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "c.svg"
    path.write_text("before")

    def full(handle: int) -> None:  # noqa: ARG001
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("os.fsync", full)
    with pytest.raises(OSError, match="No space left") as caught:
        charts.write_chart(charts.liquid_chart(FRESH), path)
    assert caught.value.filename == str(path)
    assert path.read_text() == "before"
    assert list(tmp_path.iterdir()) == [path]


def lightness(colour: object) -> float:
    """CIE 1976 L* of an sRGB colour (IEC 61966-2-1 for its linear parts)."""
    part = np.array(to_rgb(colour))  # type: ignore[arg-type]
    linear = np.where(part <= 0.04045, part / 12.92, ((part + 0.055) / 1.055) ** 2.4)
    y = float(linear @ [0.2126, 0.7152, 0.0722])
    return 116.0 * np.cbrt(y) - 16.0 if y > (6.0 / 29.0) ** 3 else y * (29.0 / 3.0) ** 3


def test_colours_hold_in_grey() -> None:
    for name in (charts.HEAT, charts.SHARE):
        scale = mpl.colormaps[name]
        steps_up = np.diff([lightness(scale(k)[:3]) for k in np.linspace(0.0, 1.0, 33)])
        assert (steps_up > 0.0).all()
    # 15 of L* is several times a difference that is seen at once.
    assert lightness(charts.ORANGE) - lightness(charts.BLUE) > 15.0
    assert lightness(charts.BLUE) - lightness("black") > 15.0


def test_drawing_is_loaded_only_when_it_draws() -> None:
    code = (
        "import sys, sonoyield.show.charts as c; assert 'matplotlib' not in sys.modules;"
        "c.liquid_chart({'a': 1.0}); assert 'matplotlib.pyplot' not in sys.modules"
    )
    subprocess.run([sys.executable, "-c", code], check=True, timeout=120)
