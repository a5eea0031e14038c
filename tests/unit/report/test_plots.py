"""Plots: what they show, that text is never a formula, and that global settings stay."""

from __future__ import annotations

import xml.etree.ElementTree as ElementTree
from typing import Any

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.figure import Figure as Drawing

from bayeslca.exceptions import ModelError
from bayeslca.report import plots
from bayeslca.report.figures import draw, inline_svg
from bayeslca.report.palette import CLASS_COLOURS, class_marker, plain


def axes() -> Any:
    return Drawing().subplots()


def texts(svg: bytes) -> list[str]:
    return ["".join(node.itertext()) for node in ElementTree.fromstring(svg).iter()
            if node.tag.endswith("}text")]  # fmt: skip


def test_profile_shows_the_medians_of_the_table(small: Any) -> None:
    ax = plots.plot_profile(small, ax=axes())
    table = small.response_probabilities()
    for k, name in enumerate(small.model.class_names):
        mine = table[(table["latent_class"] == name) & (table["category"] == "yes")]
        line = ax.containers[k].lines[0]
        np.testing.assert_allclose(line.get_xdata(), mine["median"])


def test_profile_says_what_its_interval_is(small: Any) -> None:
    assert "90 % interval" in plots.plot_profile(small, interval=0.9, ax=axes()).get_xlabel()


def test_many_items_and_classes_have_room_for_each_row(made: Any) -> None:
    wide = made.posterior(made.items(30), 8, n_cases=200)
    height = plots.profile_height(wide, wide.model.items)
    assert height / 30 >= 8 * 0.1  # a tenth of an inch is 7 points: room for each interval
    assert len(plots.plot_profile(wide, ax=axes()).get_yticks()) == 30


def test_unknown_item_is_named_with_near_ones(small: Any) -> None:
    with pytest.raises(ModelError, match=r"no item 'item_01'.*item_1"):
        plots.plot_profile(small, items=["item_01"], ax=axes())


def test_item_with_many_answers_has_a_row_for_each(mixed: Any) -> None:
    ax = plots.plot_profile(mixed, items=["type"], ax=axes())
    labels = [label.get_text() for label in ax.get_yticklabels()]
    assert labels == [f"Type of point: {name}" for name in ("hand pump", "well", "spring", "tap")]


def test_ordered_answers_stand_in_their_order(mixed: Any) -> None:
    ax = plots.plot_ordered_item(mixed, "trust", ax=axes())
    bars = [bar for bar in ax.patches if abs(bar.get_y() + bar.get_height() / 2) < 1e-9]
    lefts = [bar.get_x() for bar in bars]
    assert len(bars) == 5
    assert lefts == sorted(lefts)
    assert sum(bar.get_width() for bar in bars) == pytest.approx(1)


def test_prevalence_has_a_row_for_each_class_and_group(mixed: Any) -> None:
    ax = plots.plot_prevalence(mixed, ax=axes())
    labels = [label.get_text() for label in ax.get_yticklabels()]
    levels = ("north", "south", "overall")
    assert labels == [f"class {k}, {level}" for k in (1, 2) for level in levels]


def test_membership_counts_every_case_once(small: Any) -> None:
    ax = plots.plot_membership(small, ax=axes())
    counts = [int(note.get_text().split()[0]) for note in ax.texts]
    assert sum(counts) == small.responses.n_cases


def test_a_model_far_behind_is_an_arrow_with_its_number(made: Any) -> None:
    comparison = made.comparison()
    comparison.table.loc[1, ["elpd_diff", "elpd_diff_se", "tied"]] = [-122.7, 15.6, False]
    ax = plots.plot_class_counts(comparison, ax=axes())
    assert [note.get_text() for note in ax.texts] == ["122.7 behind"]
    assert ax.get_xlim()[0] > -60


def test_ranks_of_chains_that_differ_leave_the_band(made: Any) -> None:
    posterior = made.posterior(made.items(3), 2)
    posterior.draws.log_likelihood[0] -= 1000  # the first chain is always the lowest
    ax = plots.plot_ranks(posterior, ax=axes())
    heights = [bar.get_height() for bar in ax.containers[0]]
    assert min(heights[:5]) > 0.9
    assert max(heights[5:]) == 0


def test_traces_draw_a_line_for_each_chain(small: Any) -> None:
    ax = plots.plot_traces(small, "prevalence of managed", ax=axes())
    assert len(ax.lines) == 4
    np.testing.assert_allclose(ax.lines[1].get_ydata(), small.prevalence_draws[1, :, 0, 0])


def test_unknown_quantity_lists_those_there_are(small: Any) -> None:
    with pytest.raises(ModelError, match="prevalence of managed"):
        plots.plot_traces(small, "prevalence of manged", ax=axes())


def test_dollars_and_mark_up_are_text(mixed: Any) -> None:
    figure = draw(
        "mixed",
        lambda drawing: plots.plot_profile(
            mixed, items=["<script>alert(1)</script>", "cost"], ax=drawing.subplots()
        ),
        size=(6, 3),
        caption="",
        alt="an <alt> & more",
    )
    shown = texts(figure.svg)
    assert "<script>alert(1)</script>" in shown
    assert "Costs $5 or $10 & more" in shown
    assert "<script" not in figure.markup
    assert "&lt;script&gt;" in figure.markup


@pytest.mark.parametrize("text", ["$x$", r"\$5 and $6$", "a_b^{c}", "$\\frac{1}{2}$"])
def test_any_text_is_shown_as_it_is(text: str) -> None:
    figure = draw(
        "text", lambda drawing: drawing.text(0.5, 0.5, plain(text)), size=(3, 1), caption="", alt=""
    )
    assert texts(figure.svg) == [text]


def test_global_settings_stay(small: Any) -> None:
    before = dict(mpl.rcParams)
    draw(
        "small",
        lambda drawing: plots.plot_prevalence(small, ax=drawing.subplots()),
        size=(5, 2),
        caption="",
        alt="",
    )
    assert dict(mpl.rcParams) == before


def test_figures_in_one_page_share_no_identifier(small: Any) -> None:
    def one(name: str) -> str:
        return draw(
            name,
            lambda drawing: plots.plot_prevalence(small, ax=drawing.subplots()),
            size=(5, 2),
            caption="",
            alt="",
        ).markup

    def identifiers(markup: str) -> set[str]:
        return {node.attrib["id"] for node in ElementTree.fromstring(markup).iter()
                if "id" in node.attrib}  # fmt: skip

    first, second = one("first"), one("second")
    assert identifiers(first)
    assert not identifiers(first) & identifiers(second)


def test_references_inside_a_figure_still_hold(small: Any) -> None:
    markup = draw(
        "refs",
        lambda drawing: plots.plot_membership(small, ax=drawing.subplots()),
        size=(5, 3),
        caption="",
        alt="",
    ).markup
    root = ElementTree.fromstring(markup)
    known = {node.attrib["id"] for node in root.iter() if "id" in node.attrib}
    used = {node.attrib["href"][1:] for node in root.iter() if "href" in node.attrib}
    assert used
    assert used <= known


def test_page_wide_style_is_taken_out_of_a_figure() -> None:
    svg = (
        b'<svg xmlns="http://www.w3.org/2000/svg" width="72pt" height="36pt" version="1.1">'
        b"<defs><style>*{color:red}</style></defs><metadata/><g id='a'/></svg>"
    )
    markup = inline_svg(svg, prefix="p", alt="words")
    assert "style>" not in markup
    assert 'id="p-a"' in markup
    assert 'aria-label="words"' in markup
    assert "max-width: 115px" in markup


def test_sixteen_classes_keep_signs_of_their_own() -> None:
    signs = {(CLASS_COLOURS[k % 8], class_marker(k)) for k in range(16)}
    assert len(signs) == 16


@pytest.mark.parametrize("text", ["a\x00b", "tab\there", "x" * 500])
def test_labels_are_cut_and_cleaned(text: str) -> None:
    shown = plain(text, 20, 2)
    assert len(shown) <= 42
    assert all(c.isprintable() or c == "\n" for c in shown)
