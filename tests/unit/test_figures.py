"""Figures: written, the same twice, fit for a column, readable in grey, and present where there is nothing to draw."""

import itertools

import numpy as np
import pytest
from made_up_draws import broken, mixed, survived, table
from page_reach import reach_inches

from stabcheck.errors import StabcheckError
from stabcheck.report.answer import answer_of
from stabcheck.report.columns import Column
from stabcheck.report.figures import (
    before_and_after,
    chosen_plane,
    indicators,
    survival_with_time,
    unrolled,
    verdict_plane,
    write_figures,
)
from stabcheck.report.style import COLUMN_MM, MARKS, MM_PER_INCH, PAGE_MM
from stabcheck.verdict import Verdict

pytest.importorskip("matplotlib")


FEW = {name: np.arange(8.0).reshape(4, 2) + 1 for name in ("period_d", "inclination_rad", "node_rad")}


@pytest.fixture(scope="module")
def made():
    whole = mixed(300)
    return answer_of(whole), whole.prefix().orbits()


def texts(figure):
    return [text.get_text() for legend in figure.legends for text in legend.get_texts()]


def brightness(colour):
    red, green, blue = (int(colour[at : at + 2], 16) / 255 for at in (1, 3, 5))
    return 0.299 * red + 0.587 * green + 0.114 * blue  # ITU-R BT.601 luma, as a grey copier weighs


def small(seed=1):
    """Few parameters, because each of them is a panel and takes its time."""
    random = np.random.default_rng(seed)
    period = random.normal([4.3, 9.1], 0.01, (30, 2))
    elements = {"period_d": period, "inclination_rad": period * 0 + 1.5, "node_rad": period * 0}
    outcomes = [survived(n) if n % 3 else broken(n, 10.0 ** (3 + n / 10)) for n in range(30)]
    return table(outcomes, elements=elements, parameters={})


def test_every_figure_is_written_as_png_and_pdf_with_the_same_bytes_for_the_same_table(tmp_path):
    one, again, other = (
        write_figures(small(seed), tmp_path / name / "new") for name, seed in zip("abc", (1, 1, 2), strict=True)
    )
    names = [
        f"{name}.{kind}" for name in ("verdicts", "survival", "parameters", "indicators") for kind in ("png", "pdf")
    ]
    assert [file.name for file in one] == names
    for file, same in zip(one, again, strict=True):
        assert file.read_bytes().startswith({".png": b"\x89PNG", ".pdf": b"%PDF"}[file.suffix])
        assert file.read_bytes() == same.read_bytes(), file.name
    assert one[0].read_bytes() != other[0].read_bytes()  # control: another table


@pytest.mark.parametrize(
    "whole",
    [
        table([], 0),
        table([], 3, refused=(0, 1, 2)),
        table([survived(0)]),
        table([broken(0)]),
        table([survived(n) for n in range(4)], elements=FEW, parameters={}),
        table([broken(n) for n in range(4)], elements=FEW, parameters={}),
        table([survived(n, megno=np.nan, drift=np.empty(0)) for n in range(4)], elements=FEW, parameters={}),
        table([survived(n, megno=-1.0, drift=np.zeros(2)) for n in range(4)], elements=FEW, parameters={}),
    ],
    ids=["no draw", "all refused", "one", "one broken", "none broken", "all broken", "no indicator", "no logarithm"],
)
def test_degenerate_runs_have_figures_too(whole):
    answer, orbits = answer_of(whole), whole.prefix().orbits()
    figures = [verdict_plane(answer, orbits), survival_with_time(answer), *before_and_after(answer, orbits)]
    for figure in [*figures, indicators(answer, orbits)]:
        figure.draw_without_rendering()


def test_legends_count_every_verdict_also_those_that_nothing_has(made):
    assert texts(verdict_plane(*made)) == [f"{word} {made[0].counts.verdicts[str(word)]}" for word in reversed(Verdict)]
    empty = table([survived(0), survived(1)])
    assert "unknown 0" in texts(verdict_plane(answer_of(empty), empty))


def test_every_orbit_is_a_mark(made):
    answer, orbits = made
    marks = sum(len(points.get_offsets()) for points in verdict_plane(answer, orbits).axes[0].collections)
    assert marks == answer.counts.orbits


def test_figures_are_as_wide_as_a_column_or_a_page(made):
    answer, orbits = made
    widths = [
        figure.get_size_inches()[0] * MM_PER_INCH
        for figure in (verdict_plane(answer, orbits), survival_with_time(answer))
    ]
    assert widths == pytest.approx([COLUMN_MM, COLUMN_MM])
    pages = [*before_and_after(answer, orbits), indicators(answer, orbits)]
    assert [page.get_size_inches()[0] * MM_PER_INCH for page in pages] == pytest.approx([PAGE_MM] * len(pages))


def test_no_letter_is_smaller_than_seven_points_and_nothing_reaches_out_of_the_page(made):
    from matplotlib.text import Text

    figures = [verdict_plane(*made), survival_with_time(made[0]), *before_and_after(*made), indicators(*made)]
    for figure in figures:
        figure.draw_without_rendering()
        assert min(text.get_fontsize() for text in figure.findobj(Text) if text.get_text()) >= 7.0
        assert reach_inches(figure) < 0.01  # the anti-aliased edge of a letter


def test_control_a_label_that_is_too_long_is_noticed(made):
    figure = verdict_plane(*made)
    figure.axes[0].set_ylabel("a label that is far too long for a figure of one column " * 3)
    assert reach_inches(figure) > 0.01


def test_verdicts_can_be_told_apart_in_a_grey_copy():
    for (one, mark), (other, its) in itertools.combinations(MARKS.items(), 2):
        shades_apart = abs(brightness(mark.colour) - brightness(its.colour)) > 0.08
        assert shades_apart or mark.marker != its.marker, (one, other)
    looks = {(mark.marker, mark.hollow) for mark in MARKS.values()}
    assert len(looks) == len(MARKS) == len(Verdict)  # and by their shapes alone


def test_control_pure_red_and_pure_green_of_one_lightness_would_not_pass():
    red = "#ff0000"
    assert abs(brightness(red) - brightness("#008200")) < 0.08


def test_the_plane_is_the_one_asked_for_or_the_most_shifted(made):
    answer, orbits = made
    assert [column.name for column in chosen_plane(answer, orbits, None)] == ["e c", "m c"]
    assert [column.name for column in chosen_plane(answer, orbits, ("P ratio c/b", "e b"))] == ["P ratio c/b", "e b"]
    drawn = chosen_plane(answer, orbits, ("planets.c.eccentricity", "m b"))
    assert [column.name for column in drawn] == ["planets.c.eccentricity", "m b"]


def test_a_plane_that_is_not_there_is_refused_with_those_that_are(made):
    with pytest.raises(StabcheckError, match="e c"):
        chosen_plane(*made, ("e d", "e c"))


def test_axes_name_quantity_and_unit(made):
    axes = verdict_plane(*made).axes[0]
    assert (axes.get_xlabel(), axes.get_ylabel()) == ("e c", "m c [Mearth]")
    assert survival_with_time(made[0]).axes[0].get_xlabel() == "time [yr]"


def test_angles_are_drawn_without_a_break_at_zero(made):
    _, orbits = made
    around = np.where(np.arange(len(orbits)) % 2, 359.0, 1.0)
    values = unrolled(Column(name="M b", unit="deg", circular=True, values=around), orbits)
    assert np.ptp(values) == pytest.approx(2.0)


def test_the_settings_of_the_caller_are_left_alone(made):
    import matplotlib

    before = dict(matplotlib.rcParams)
    verdict_plane(*made)
    assert dict(matplotlib.rcParams) == before
