"""Errors are grouped by the axis they share, lines never cross the size 0, and names stand clear of the lines."""

from collections.abc import Callable
from functools import partial

import numpy as np
import pytest
from markupsafe import Markup
from matplotlib.figure import Figure as Canvas

from pbm.io.report import labels
from pbm.io.report.error_plots import first_event_plot, unreliable_plot
from pbm.io.report.groups import FaultGroup, fault_groups
from pbm.io.report.look import drawing
from pbm.io.report.svg import Album
from pbm.io.report.trace_plot import trace_plot
from pbm.io.report.until_plot import until_plot
from pbm.records.appraisal import StreamAppraisal
from tests.io.report import sample, variants
from tests.io.report.variants import judged_of


def test_errors_of_one_kind_and_unit_share_an_axis() -> None:
    groups = fault_groups(judged_of(sample.CALCIUM).faults, "mmol/L")
    assert [(one.kind, one.unit) for one in groups] == [
        ("shift", "TEa"),
        ("drift over 200 results", "TEa"),
        ("noise", "times the analytic SD"),
        ("sporadic error in 10\u202f% of results", "TEa"),
    ]
    assert groups[0].sizes == (-2, -1.5, -1, -0.75, -0.5, -0.25, 0.25, 0.5, 0.75, 1, 1.5, 2)
    assert groups[2].sizes == (1.5, 2, 3)


def test_the_same_sizes_again_start_a_group_of_their_own() -> None:
    faults = [one for one in judged_of(sample.CALCIUM).faults if one.kind == "drift"]
    groups = fault_groups([*faults, *faults], "mmol/L")
    assert [one.sizes for one in groups] == [(-2, -1, -0.5, 0.5, 1, 2)] * 2


@pytest.mark.parametrize(
    ("signs", "parts"), [((-1, 1), [slice(0, 6), slice(6, 12)]), ((1,), [slice(0, 6)]), ((-1,), [slice(0, 6)])]
)
def test_a_line_never_crosses_the_size_nought(signs: tuple[int, ...], parts: list[slice]) -> None:
    faults = [one for one in judged_of(sample.SODIUM).faults if one.sign in signs]
    (group,) = fault_groups(faults, "mmol/L")
    assert group.parts == parts


def test_an_error_in_the_unit_of_the_analyte_says_so_at_the_axis() -> None:
    faults = [one.model_copy(update={"unit": "unit"}) for one in judged_of(sample.SODIUM).faults]
    (group,) = fault_groups(faults, "mmol/L")
    assert group.axis == "size of the shift, mmol/L"


class Kept(Album):
    """An album that keeps the last figure as it was drawn."""

    canvas: Canvas

    def inline(self, figure: Canvas, seen: str) -> Markup:
        self.canvas = figure
        return super().inline(figure, seen)


def plots_of(album: Album, stream: StreamAppraisal, *, watched: bool) -> list[Callable[[], Markup]]:
    group: FaultGroup
    (group,) = fault_groups(judged_of(stream).faults, "g/L")
    traces: list[Callable[[], Markup]] = [partial(trace_plot, album, one, "g/L") for one in stream.monitors]
    return [
        *traces,
        lambda: unreliable_plot(album, group, watched=watched),
        lambda: until_plot(album, group, 7.0, watched=watched),
        lambda: first_event_plot(album, group, watched=watched),
    ]


@pytest.mark.parametrize(
    ("stream", "watched"),
    [
        (sample.ALBUMIN, True),
        (variants.with_imprecision(sample.SODIUM), True),
        (variants.unwatched(sample.ALBUMIN), False),
    ],
    ids=["one monitor", "one limit open", "no monitor"],
)
def test_what_is_drawn_stays_inside_the_axes(stream: StreamAppraisal, watched: bool) -> None:
    album = Kept()
    with drawing():
        for draw in plots_of(album, stream, watched=watched):
            draw()
            (axes,) = album.canvas.axes
            left, right = axes.get_xlim()
            bottom, top = axes.get_ylim()
            for line in axes.lines:
                if line.get_transform() == axes.transData:
                    x, y = np.asarray(line.get_xdata()), np.asarray(line.get_ydata())
                    assert np.all((left <= x) & (x <= right) & (bottom <= y) & (y <= top))


def test_without_a_monitor_only_the_controls_are_drawn() -> None:
    with drawing():
        for draw in plots_of(Album(), variants.unwatched(sample.ALBUMIN), watched=False):
            told = str(draw())
            assert "controls alone" in told
            assert "monitor" not in told


def test_an_open_limit_is_neither_drawn_nor_told() -> None:
    second = variants.with_imprecision(sample.SODIUM).monitors[1]
    with drawing():
        told = str(trace_plot(Album(), second, "mmol/L"))
    assert "upper limit" in told
    assert "lower limit" not in told and "inf" not in told


def test_names_stand_inside_the_axes_and_on_no_line() -> None:
    xs = np.linspace(0, 10, 11)
    drawn = {"rising": np.column_stack([xs, xs]), "falling": np.column_stack([xs, 10 - xs])}
    lines = [labels.Line(name, "black", (points,)) for name, points in drawn.items()]
    canvas = Canvas(figsize=(4.3, 3.05))
    axes = canvas.add_axes((0.15, 0.15, 0.8, 0.8))
    axes.set_xlim(0, 10)
    axes.set_ylim(0, 10)
    labels.write_names(axes, lines)
    assert [one.get_text() for one in axes.texts] == ["rising", "falling"]
    boxes = [one.get_window_extent() for one in axes.texts]
    frame = axes.get_window_extent()
    for box in boxes:
        assert frame.x0 <= box.x0 <= box.x1 <= frame.x1 and frame.y0 <= box.y0 <= box.y1 <= frame.y1
        for line in lines:
            dense = axes.transData.transform(
                np.column_stack([np.interp(np.linspace(0, 10, 400), xs, line.parts[0][:, i]) for i in (0, 1)])
            )
            assert not any(box.contains(*point) for point in dense)
    assert not boxes[0].overlaps(boxes[1])


def test_figures_share_their_styles_and_keep_their_identifiers_apart() -> None:
    (group,) = fault_groups(judged_of(sample.ALBUMIN).faults, "g/L")
    album = Album()
    with drawing():
        first, second = (unreliable_plot(album, group, watched=True) for _ in range(2))
        styles = album.styles()
        unreliable_plot(album, group, watched=True)
    assert album.styles() == styles
    assert album.figures == 3
    assert first != second
    assert first.replace("plot1-", "plot2-") == second
    assert "style=" not in first
