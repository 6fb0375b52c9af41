"""Nodes of a mode: order, shares and signs, where some have leverage and others only transfers."""

from dataclasses import replace

import pytest
from invented_results import with_pole

from polefit.estimates import Estimate
from polefit.modes import Loop, NodeView
from polefit.report import nodes
from polefit.report.figures import plot_nodes
from polefit.report.html import identification_html
from polefit.report.text import identification_text
from polefit.responses import Channel


@pytest.fixture
def mixed(unstable):
    """One driven node, and transfers from it to eleven others, strongest in the middle."""
    sizes = [1, 2, 3, 4, 5, 10, 5, 4, 3, 2, 1]
    views = [
        NodeView(Channel("in", "in"), 4e9 + 0j, leverage=Estimate.normal(4e9, 1e7)),
        *(NodeView(Channel(f"n{i}", "in"), 1e9j * s) for i, s in enumerate(sizes)),
    ]
    mode = replace(unstable.modes[0], nodes=tuple(views))
    names = tuple(v.channel.output for v in views)
    return replace(unstable, modes=(mode, *unstable.modes[1:]), loops=(Loop(0, names),))


def test_every_row_of_a_loop_has_its_residue(mixed):
    rows = nodes.loop_table(mixed, 0, 8)
    assert rows[0] == ("node", "damping ratio added per mS", "leverage in 1/(s·S)", "residue")
    assert [row[0] for row in rows[1:4]] == ["in", "n5 ← in", "n4 ← in"]
    assert [row[3] for row in rows[1:]] == [
        "40 %", "100 %", "50 %", "50 %", "40 %", "40 %", "30 %", "30 %"]  # fmt: skip
    assert all(cell for row in rows for cell in row)
    assert rows[2][1:3] == ("–", "–")


def test_shares_are_of_the_strongest_that_is_listed(mixed):
    """Driving-point rows come first and may crowd out the strongest transfer."""
    assert [row[3] for row in nodes.loop_table(mixed, 0, 1)[1:]] == ["100 %"]


def test_driving_point_rows_of_a_matrix_are_taken(mixed):
    views = (*mixed.modes[0].nodes, NodeView(Channel("in", "n5"), 9e10 + 0j))
    odd = replace(mixed, modes=(replace(mixed.modes[0], nodes=views), *mixed.modes[1:]))
    names = [row[0] for row in nodes.loop_table(odd, 0, 20)[1:]]
    assert names.count("in") == 1
    assert "in ← n5" not in names


def test_mixed_nodes_are_explained(mixed, unstable, stable):
    text = identification_text(mixed)
    assert "where in percent: residue" in " ".join(text.split())
    assert "in percent" not in identification_text(stable)
    # r·1e-3/|p| = 4e9·1e-3/(2π·1.504e9)
    assert "in +0.00042, n5 ← in 100 %" in text


def test_only_what_is_shown_is_explained(stable):
    """Real poles have no damping to add to; among many modes their nodes are not shown."""
    real = with_pole(stable.modes[2], complex(-1e9, 0.0))
    many = replace(stable, modes=(stable.modes[0], *[real] * 5))
    assert "in percent" not in identification_text(many)
    assert "where in percent" not in identification_html(many)
    few = replace(stable, modes=(stable.modes[0], real))
    assert "in percent" in identification_text(few)


def test_figures_keep_the_leverages_beside_transfers(mixed):
    upper = plot_nodes(mixed, 0)
    figure = upper.get_figure(root=True)
    assert upper.get_xlabel().startswith("damping ratio added by 1 mS")
    assert [t.get_text() for t in upper.get_yticklabels()] == ["in"]
    lower = figure.axes[1]
    assert lower.get_xlabel() == "residue relative to the strongest"
    assert [t.get_text() for t in lower.get_yticklabels()][:2] == ["n5 ← in", "n4 ← in"]
    given = figure.add_subplot()
    assert plot_nodes(mixed, 0, ax=given).get_xlabel().startswith("damping ratio")


def with_leverage(result, value, std):
    """The result whose last node has another leverage and residue."""
    mode = result.modes[0]
    views = (
        *mode.nodes[:-1],
        replace(mode.nodes[-1], residue=complex(value), leverage=Estimate.normal(value, std)),
    )
    return replace(result, modes=(replace(mode, nodes=views), *result.modes[1:]))


@pytest.mark.parametrize(
    ("value", "std", "brief"),
    [(-1e-8, 0.0, "bias ≈ 0"), (-1e9, 8e8, "bias ≈ 0"), (-1e9, 1e8, "bias −0.00011")],
)
def test_no_sign_where_none_can_be_told(unstable, value, std, brief):
    """dζ/dG per mS is about r·1e-3/|p| = 1e9·1e-3/(2π·1.504e9) = 1.06e-4 for a light mode."""
    odd = with_leverage(unstable, value, std)
    assert nodes.node_strengths(odd.modes[0])[-1].brief == brief


def test_a_node_that_sees_nothing_is_not_called_worse(unstable):
    odd = with_leverage(unstable, -1e-8, 0.0)
    names = tuple(v.channel.output for v in odd.modes[0].nodes[-3:])
    odd = replace(odd, loops=(Loop(0, names),))
    assert [row for row in nodes.loop_table(odd, 0, 8) if row[0] == "bias"] == [
        ("bias", "≈ 0", "≈ 0", "< 0.1 %")
    ]
    labels = [t.get_text() for t in plot_nodes(odd, 0).get_yticklabels()]
    assert "bias" in labels
