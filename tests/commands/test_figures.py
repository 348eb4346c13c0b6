"""The pictures: their bytes, their texts, and what is said where they cannot be drawn."""

from __future__ import annotations

import re
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

pytest.importorskip("matplotlib", reason="pictures need the extra 'figures'")

from matplotlib.figure import Figure
from matplotlib.text import Text

from clockfall.analysis.budget import DECAY, decay
from clockfall.analysis.outcome import Drawn, Outcome
from clockfall.analysis.study import Choices, Study
from clockfall.analysis.weighing import study
from clockfall.effects.host import Host
from clockfall.effects.loading import load_host
from clockfall.errors import BadInput
from clockfall.figures.budget_chart import budget_chart
from clockfall.figures.masses_plane import WeighedMasses, masses_plane, past_the_edge
from clockfall.figures.periastron_shift import TimedShifts, julian_year, periastron_shift, shift_of
from clockfall.figures.plane import Curve, Plane, close_axis, plane, whole_axis
from clockfall.figures.saving import UnknownFormat, save
from clockfall.files.system_file import demo_system, read_system
from clockfall.files.whole import CannotWrite

from .conftest import PUBLISHED

FEW = Choices(draws=2048)  # fewer leave the two sides of an interval apart
HULSE_TAYLOR = PUBLISHED / "psr-b1913+16.toml"
PERIOD = 0.322997448918 * 86400.0  # s, of the fixture


@pytest.fixture(scope="module")
def host() -> Host:
    """Every installed effect."""
    return load_host()


@pytest.fixture(scope="module")
def demo(host: Host) -> Outcome:
    """Return the budget of the demo."""
    return decay(host, demo_system(host.cards).system, FEW)


@pytest.fixture(scope="module")
def budget(host: Host) -> Outcome:
    """Return the budget of a published binary."""
    return decay(host, read_system(HULSE_TAYLOR, host.cards).system, FEW)


@pytest.fixture(scope="module")
def weighed(host: Host) -> Study:
    """Return a published binary, weighed."""
    return study(host, read_system(HULSE_TAYLOR, host.cards).system, FEW)


def masses_of(weighed: Study) -> WeighedMasses:
    """Return the masses of a study."""
    m_1, m_2 = weighed.sample.state.known("mass_1", "mass_2")
    return WeighedMasses(*(Drawn.from_batch(m, weighed.sample.possible) for m in (m_1, m_2)))


def drawn_plane(weighed: Study, host: Host) -> Figure:
    """Return the plane of masses with its close-up."""
    masses = masses_of(weighed)
    axis = whole_axis(masses.mass_1.central, masses.mass_2.central)
    close = plane(weighed, host, close_axis(masses.mass_1), close_axis(masses.mass_2))
    return masses_plane(plane(weighed, host, axis, axis), masses, close, "PSR B1913+16")


@pytest.fixture
def pictures(budget: Outcome, weighed: Study, host: Host) -> dict[str, Callable[[], Figure]]:
    """Every picture, by name."""
    return {
        "budget": lambda: budget_chart(budget),
        "shift": lambda: periastron_shift(budget, PERIOD, (1975.0, 2020.0)),
        "plane": lambda: drawn_plane(weighed, host),
    }


def shown_texts(figure: Figure) -> list[Text]:
    """Return every text that a figure shows, once it is laid out."""
    figure.draw_without_rendering()
    found = figure.findobj(lambda artist: isinstance(artist, Text) and artist.get_visible())
    return [text for text in found if isinstance(text, Text) and text.get_text().strip()]


def texts(figure: Figure) -> list[str]:
    """Return what they say."""
    return [text.get_text() for text in shown_texts(figure)]


@pytest.mark.parametrize("suffix", [".svg", ".pdf", ".png"])
def test_a_picture_is_the_same_bytes_each_time(budget: Outcome, tmp_path: Path, suffix: str) -> None:
    """The same outcome, drawn and saved twice, gives the same file, without a date in it."""
    for number in (1, 2):
        save(budget_chart(budget), tmp_path / f"{number}{suffix}")
    first, second = ((tmp_path / f"{number}{suffix}").read_bytes() for number in (1, 2))
    assert first == second
    assert not re.search(rb"CreationDate|<dc:date>|tEXtSoftware", first)
    assert len(list(tmp_path.iterdir())) == 2  # nothing unfinished is left


def test_the_other_pictures_are_the_same_bytes_too(pictures: dict[str, Callable[[], Figure]], tmp_path: Path) -> None:
    """The plane and the shift are repeatable as SVG, hatches and clips too, whatever settings the user has."""
    import matplotlib as mpl

    for name in ("plane", "shift"):
        save(pictures[name](), tmp_path / f"{name}-1.svg")
        with mpl.rc_context({"font.size": 20.0, "lines.linewidth": 9.0, "svg.hashsalt": "another"}):
            save(pictures[name](), tmp_path / f"{name}-2.svg")
        assert (tmp_path / f"{name}-1.svg").read_bytes() == (tmp_path / f"{name}-2.svg").read_bytes()


def test_axis_labels_have_units(pictures: dict[str, Callable[[], Figure]]) -> None:
    """Every axis that has a scale is named with its unit in brackets."""
    for name, draw in pictures.items():
        labels = [label for axes in draw().axes for label in (axes.get_xlabel(), axes.get_ylabel()) if label]
        assert labels, name
        for label in labels:
            assert re.search(r"\[(s/s|s|yr|Msun)\]", label), f"{name}: {label}"


@pytest.mark.parametrize("system", ["demo", "budget"])
def test_every_effect_is_in_the_chart(request: pytest.FixtureRequest, system: str) -> None:
    """The chart names each effect that contributes, and each sum, with a number beside it; no text lies on another."""
    outcome: Outcome = request.getfixturevalue(system)
    figure = budget_chart(outcome)
    shown = texts(figure)
    contributions = outcome.contributions(DECAY)
    for finding in contributions:
        assert ("given in the file" if finding.effect == "given" else finding.effect) in shown
    sums = {"predicted", "apparent parts", "measured", "measured, apparent off"}
    assert sums <= set(shown)
    numbers = [text for text in shown if re.fullmatch(r" *-?\d\.\d+\(\d+\) *", text)]
    assert len(numbers) == len(contributions) + len(sums)
    assert any("1e-12 s/s" in text for text in shown)
    boxes = [(text.get_text(), text.get_window_extent()) for text in shown_texts(figure)]
    assert [(a, b) for n, (a, box) in enumerate(boxes) for b, other in boxes[:n] if box.overlaps(other)] == []


def test_an_outcome_without_a_budget_is_told(budget: Outcome) -> None:
    """A chart of a rate that the outcome lacks says so."""
    with pytest.raises(BadInput, match="no budget of spin_rate"):
        budget_chart(budget, "spin_rate")


def test_the_plane_names_each_measured_parameter(weighed: Study, host: Host) -> None:
    """Each measured parameter that is predicted has an entry with its value, and the lines are numbered."""
    shown = " | ".join(texts(drawn_plane(weighed, host)))
    for entry in (
        "1  longitude of periastron rate 4.2265",
        "Einstein delay amplitude 4.307",
        "orbital period rate -2.",
    ):
        assert entry in shown
    for entry in ("Shapiro range", "Shapiro shape", "sin i > 1", "all of this lies in the band of 4, 5"):
        assert entry in shown


def test_the_weighing_curves_meet_at_the_masses(weighed: Study, host: Host) -> None:
    """At the weighed masses the two predictions that weighed them equal the measurements."""
    masses = masses_of(weighed)
    m_1, m_2 = masses.mass_1.central, masses.mass_2.central
    found = plane(weighed, host, np.array([m_1, 2.0 * m_1]), np.array([m_2, 2.0 * m_2]))
    for name in weighed.used:
        curve = next(curve for curve in found.curves if curve.name == name)
        assert curve.predicted[0, 0] == pytest.approx(curve.value, rel=1e-10, abs=0.0)  # the weighing stops at 1e-11


def test_the_ellipse_holds_its_share() -> None:
    """The ellipse round normal draws holds 68.3 % of them."""
    rng = np.random.default_rng(5)
    a, b = rng.standard_normal((2, 40_000))
    masses = WeighedMasses(Drawn(1.4, 1.4 + 0.02 * a), Drawn(1.3, 1.3 - 0.01 * a + 0.004 * b))
    outline = masses.ellipse()
    assert outline is not None
    from matplotlib.path import Path as Outline

    inside = Outline(outline.T).contains_points(np.stack([masses.mass_1.draws, masses.mass_2.draws], axis=-1))
    assert np.mean(inside) == pytest.approx(0.6827, abs=0.01)  # 4 sigma of 40 000 draws, and of their covariance
    assert WeighedMasses(Drawn(1.4, np.empty(0)), Drawn(1.3, np.empty(0))).ellipse() is None


def test_a_line_beside_the_edge_of_meaning_is_drawn() -> None:
    """A prediction is carried on by one cell, exactly where it is linear, and no farther."""
    x, y = np.meshgrid(np.arange(6.0), np.arange(6.0), indexing="ij")
    linear = x + 2.0 * y
    cut = np.where(y > 3.0, np.nan, linear)
    filled = past_the_edge(cut)
    np.testing.assert_allclose(filled[:, :5], linear[:, :5], rtol=1e-15)  # sums of small integers
    assert np.isnan(filled[:, 5]).all()


def test_a_plane_checks_its_shapes() -> None:
    """Curves that do not fit the grid, and axes that do not rise, are told."""
    axis = np.linspace(1.0, 2.0, 4)
    curve = Curve("drag", "drag", np.ones((3, 4)), 1.0, 0.1, 0.1)
    with pytest.raises(BadInput, match=r"drag: expected an array of shape \(4, 4\)"):
        Plane(axis, axis, (curve,))
    with pytest.raises(BadInput, match="rising masses"):
        Plane(axis[::-1], axis, ())


def test_the_shift_is_the_sum_over_orbits() -> None:
    """The parabola is what a period that changes by rate x period each orbit adds up to."""
    period, rate, orbits = 2.0e4, -1.0e-9, 20_000
    drift = rate * period * np.arange(orbits, dtype=np.float64)  # the n-th orbit differs by this
    years = np.array([orbits * period / (365.25 * 86400.0)])
    assert shift_of(rate, period, years)[0] == pytest.approx(
        np.sum(drift), rel=2.0 / orbits, abs=0.0
    )  # n (n - 1) against n^2
    assert julian_year(51544.5) == 2000.0


def test_the_shift_has_its_curves_and_points(budget: Outcome) -> None:
    """Prediction, measurement and timed points are told apart in the legend; two panels share the years."""
    years = np.array([1980.0, 1990.0, 2000.0])
    timed = TimedShifts(years, np.array([-1.0, -0.5, 0.0]), np.full(3, 0.1))
    figure = periastron_shift(budget, PERIOD, (1975.0, 2020.0), timed)
    assert {"predicted", "by the measured rate", "timed"} <= set(texts(figure))
    assert figure.axes[0].get_xlim() == figure.axes[1].get_xlim() == (1975.0, 2020.0)


def test_what_makes_no_shift_is_told(budget: Outcome) -> None:
    """Wrong periods, years and points are told with what was found."""
    with pytest.raises(BadInput, match="period: expected a positive number"):
        periastron_shift(budget, 0.0, (1975.0, 2020.0))
    with pytest.raises(BadInput, match=r"found 2020\.0 and 1975\.0"):
        periastron_shift(budget, PERIOD, (2020.0, 1975.0))
    with pytest.raises(BadInput, match="one shape"):
        TimedShifts(np.zeros(2), np.zeros(3), np.zeros(2))


@pytest.mark.parametrize("name", ["picture.jpg", "picture", "picture.svg.gz"])
def test_other_formats_are_refused(budget: Outcome, tmp_path: Path, name: str) -> None:
    """A suffix that is not written is refused, listing those that are; nothing is left behind."""
    with pytest.raises(UnknownFormat, match=r"expected one of \.svg, \.pdf, \.png, found") as told:
        save(budget_chart(budget), tmp_path / name)
    assert told.value.suffix == Path(name).suffix
    assert list(tmp_path.iterdir()) == []


def test_nothing_is_overwritten_unasked(tmp_path: Path) -> None:
    """A file that is there stays as it is, unless it is to be replaced."""
    path = tmp_path / "picture.png"
    path.write_bytes(b"dear")
    with pytest.raises(CannotWrite, match="exists already"):
        save(Figure(), path)
    assert path.read_bytes() == b"dear"
    save(Figure(), path, overwrite=True)
    assert path.read_bytes().startswith(b"\x89PNG")


def in_a_fresh_process(code: str) -> str:
    """Return what a fresh Python prints, which draws the demo's budget by the name `draw()`."""
    start = (
        "import sys\n"
        "from clockfall.analysis.budget import decay\n"
        "from clockfall.analysis.study import Choices\n"
        "from clockfall.effects.loading import load_host\n"
        "from clockfall.files.system_file import demo_system\n"
        "from clockfall.figures import masses_plane, periastron_shift, plane, saving\n"
        "from clockfall.figures.budget_chart import budget_chart\n"
        "def draw():\n"
        "    host = load_host()\n"
        "    return budget_chart(decay(host, demo_system(host.cards).system, Choices(draws=20)))\n"
    )
    ended = subprocess.run(
        [sys.executable, "-c", start + code], capture_output=True, text=True, check=False, timeout=120
    )
    assert ended.stderr == ""
    return ended.stdout.strip()


def test_pictures_need_no_window(tmp_path: Path) -> None:
    """Matplotlib is loaded by drawing alone, and its interface with windows and global state never."""
    path = str(tmp_path / "budget.png")
    said = in_a_fresh_process(
        "print('matplotlib' in sys.modules)\n"
        f"from pathlib import Path\nsaving.save(draw(), Path({path!r}))\n"
        "import matplotlib\n"
        "print('matplotlib.pyplot' in sys.modules, matplotlib.rcParams['font.size'])"
    )
    assert said.split() == ["False", "False", "10.0"]  # 10 is matplotlib's own size


def test_without_matplotlib_the_extra_is_named() -> None:
    """Where matplotlib is not installed, the error says what to install."""
    said = in_a_fresh_process(
        "sys.modules['matplotlib'] = None\n"
        "from clockfall.errors import ClockfallError\n"
        "try:\n    draw()\nexcept ClockfallError as error:\n    print(error)"
    )
    assert said == "pictures need matplotlib, which is not installed; pip install 'clockfall[figures]'"
