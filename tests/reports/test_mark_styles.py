"""Marks and brackets: no kind is told by colour alone, no bracket too narrow to be seen."""

from matplotlib.figure import Figure

from reports import mark_styles
from reports.insertions import KINDS, Bracket, Mark


def test_each_kind_has_a_shape_of_its_own() -> None:
    axes = Figure().add_subplot()
    mark_styles.plot_marks(axes, [(1.0, 1.0, kind) for kind in (*KINDS, "void")])
    assert len({str(line.get_marker()) for line in axes.lines}) == len(KINDS) + 1


def test_the_legend_names_what_occurs_and_nothing_else() -> None:
    figure = Figure()
    shown = [Mark("short", None, None, 0.0, "pulses"), Mark("band1.low", 900.0, None, 0.0, "void")]
    mark_styles.legend(figure, shown, 0.1, 0.9, 8.6)
    (legend,) = figure.legends
    assert [text.get_text() for text in legend.get_texts()] == ["pulses", "void, counts for nothing"]


def test_a_bracket_is_to_scale_unless_it_could_not_be_seen() -> None:
    axes = Figure().add_subplot()
    axes.set_xlim(0, 100)
    mark_styles.plot_bracket(axes, Bracket(20, 40, None, None, "pass"), 0.5, 0.1, 0.01)
    mark_styles.plot_bracket(axes, Bracket(60, 60.001, None, None, "pass"), 0.5, 0.1, 0.01)
    wide, narrow = (axes.lines[index].get_xdata() for index in (2, 5))
    assert wide[1] - wide[0] == 0.2  # computed: 20 of 100
    assert abs((narrow[1] - narrow[0]) - 0.01) < 1e-9
