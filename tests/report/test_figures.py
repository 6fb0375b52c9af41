"""Figures: what is drawn is what was found, whatever the names, scales and numbers."""

import io
import math
from dataclasses import replace

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from PIL import Image

from polefit.errors import ArgumentError, FileError
from polefit.report import drawing, units
from polefit.report.figures import (
    figures_of,
    plot_detection,
    plot_nodes,
    plot_overview,
    plot_poles,
    plot_response,
    save_figures,
)
from polefit.report.pole_map import region
from polefit.report.response_plot import trace_of

HOSTILE = (
    "<script>alert(1)</script>",
    "$a_b^$",
    "_hidden",
    "日本",
    "x" * 300,
    "in\x1b[31m",
    '"q"&',
)


def texts(figure):
    return [t.get_text() for t in figure.findobj(mpl.text.Text) if t.get_text()]


def figure_of(ax):
    return ax.get_figure(root=True)


@pytest.mark.parametrize("verdict", ["unstable", "stable", "undecided"])
def test_figures_are_drawn_outside_pyplot(build, verdict):
    import matplotlib.pyplot as plt

    before, settings = plt.get_fignums(), dict(mpl.rcParams)
    for name, figure in figures_of(build(verdict, nodes=("a", "b"), points=61)):
        assert isinstance(figure, Figure), name
        assert drawing.figure_bytes(figure, "png", dpi=40).startswith(b"\x89PNG")
    assert plt.get_fignums() == before
    assert dict(mpl.rcParams) == settings


def test_axes_given_are_the_axes_used(unstable):
    figure = Figure()
    first, second, third, *rest = figure.subplots(6, 1)
    assert plot_poles(unstable, ax=first) is first
    assert plot_nodes(unstable, 0, ax=second) is second
    assert plot_detection(unstable, ax=third) is third
    assert plot_response(unstable, "gate2", axes=tuple(rest)) == tuple(rest)
    assert figure.axes == [first, second, third, *rest]


def test_pole_map_shows_every_mode_on_its_side(unstable):
    ax = plot_poles(unstable)
    assert isinstance(ax, Axes)
    drawn = {
        (round(float(line.get_xdata()[0])), round(float(line.get_ydata()[0]), 12))
        for line in ax.lines
        if len(line.get_xdata()) == 1
    }
    for mode in unstable.modes:
        place = (round(mode.natural_frequency_hz.value), round(mode.damping_ratio.value, 12))
        assert place in drawn
    shown = texts(figure_of(ax))
    assert "UNSTABLE: grows" in shown
    assert "1: 1.504 GHz" in shown
    low, high = ax.get_ylim()
    assert low < -0.0123 < 0 < 1 < high


def test_labels_say_when_they_give_another_frequency_than_the_axis(unstable):
    """The third mode is damped by 0.35: |p|/2π is 7 % above Im(p)/2π."""
    shown = texts(figure_of(plot_poles(unstable)))
    assert "3: rings at 38 MHz" in shown
    assert "2: 812 MHz" in shown


def test_the_legend_shows_the_region_in_its_colour(stable):
    legend = plot_poles(stable).get_legend()
    names = [t.get_text() for t in legend.get_texts()]
    swatch = legend.legend_handles[names.index("95 % region")]
    assert mpl.colors.same_color(swatch.get_edgecolor(), drawing.LOOKS["stable"].colour)
    unknown = tuple(replace(m, covariance=((math.nan,) * 2,) * 2) for m in stable.modes)
    bare = plot_poles(replace(stable, modes=unknown)).get_legend()
    assert "95 % region" not in [t.get_text() for t in bare.get_texts()]


def test_95_percent_region_holds_95_percent_of_the_draws(unstable):
    """Seeded draws of the pole against the outline, in the plane that is drawn.

    4000 draws leave 0.35 % on the share; the bounds are three of these.
    """
    mode = unstable.modes[2]  # the least sharp one
    covariance = np.array(mode.covariance)
    draws = np.random.default_rng(3).multivariate_normal([0, 0], covariance, 4000)
    poles = mode.pole_rad_per_s + draws[:, 0] + 1j * draws[:, 1]
    places = np.stack([np.abs(poles) / math.tau, -poles.real / np.abs(poles)], axis=1)
    inside = mpl.path.Path(region(mode, 400)).contains_points(places)
    assert 0.939 < inside.mean() < 0.961


def test_pole_without_covariance_is_a_bare_mark(unstable):
    unknown = ((math.nan,) * 2,) * 2
    mode = replace(unstable.modes[0], covariance=unknown)
    assert region(mode) is None
    drawing.figure_bytes(figure_of(plot_poles(replace(unstable, modes=(mode,)))), "png", 40)


def test_labels_of_close_modes_do_not_cover_each_other(unstable):
    first = unstable.modes[0]
    close = tuple(
        replace(first, pole_rad_per_s=first.pole_rad_per_s * (1 + 0.004 * i)) for i in range(4)
    )
    figure = figure_of(plot_poles(replace(unstable, modes=close)))
    figure.draw_without_rendering()
    boxes = [t.get_window_extent() for t in figure.findobj(mpl.text.Annotation)]
    assert len(boxes) == 4
    assert not any(a.overlaps(b) for i, a in enumerate(boxes) for b in boxes[:i])


@pytest.mark.parametrize(("wide", "scale"), [(True, "log"), (False, "log")])
def test_wide_bands_have_a_logarithmic_axis(build, wide, scale):
    result = build(wide=wide, points=61)
    assert plot_response(result, 0)[0].get_xscale() == scale
    assert plot_poles(result).get_xscale() == scale


def test_narrow_bands_have_a_linear_axis_with_one_prefix(unstable):
    narrow = tuple(r.in_band(1e9, 2e9) for r in unstable.responses)
    mode = unstable.modes[0]
    axes = plot_response(replace(unstable, responses=narrow, modes=(mode,)), 0)
    assert axes[0].get_xscale() == "linear"
    figure = figure_of(axes[2])
    figure.draw_without_rendering()
    assert axes[2].get_xlabel() == "frequency in GHz"
    assert "1.4" in [t.get_text() for t in axes[2].get_xticklabels()]


@pytest.mark.parametrize(
    ("low", "high", "wide"),
    [(1e9, 31e9, False), (1e9, 32e9, True), (0.0, 1e9, False), (1.0, 1.0, False)],
)
def test_the_limit_is_a_decade_and_a_half(low, high, wide):
    """10^1.5 = 31.6."""
    assert units.is_wide(low, high) is wide


def test_response_is_data_and_model(unstable):
    trace = trace_of(unstable, 1)
    assert np.array_equal(trace.data, unstable.responses[1].values[:, 0])
    whole = unstable.model.response(trace.frequency_hz)[:, 1]
    assert trace.model == pytest.approx(whole)
    magnitude, phase, residual = plot_response(unstable, unstable.channels[1])
    assert np.abs(trace.data).max() in magnitude.lines[0].get_ydata()
    assert magnitude.get_yscale() == "log"
    # drawn phases differ from those of the data by whole turns only
    shown = np.interp(trace.frequency_hz, phase.lines[0].get_xdata(), phase.lines[0].get_ydata())
    turns = (shown - np.degrees(np.angle(trace.data))) / 360
    assert np.abs(turns - np.round(turns)).max() < 1e-9
    inside = np.abs(residual.lines[1].get_ydata()) < 1.96 / math.sqrt(2) * 2e-3
    # the data carry noise of 2e-3: 95 % of 301 parts, within four binomial standard deviations
    assert abs(inside.mean() - 0.95) < 4 * math.sqrt(0.95 * 0.05 / 301)


def test_channels_of_several_sets_and_of_one_are_found(build):
    several = build(nodes=("a", "b", "c"), points=31)
    joined = replace(
        several.responses[0],
        values=np.hstack([r.values for r in several.responses]),
        channels=several.channels,
    )
    one = replace(several, responses=(joined,))
    for k in range(3):
        assert trace_of(one, k).data == pytest.approx(trace_of(several, "abc"[k]).data)


def test_noise_of_each_sample_is_used_where_it_is_known(build):
    result = build(nodes=("a", "b"), points=31)
    noise = tuple(np.full((31, 1), 0.1 * (j + 1)) for j in range(2))
    assert trace_of(replace(result, noise_std=noise), 1).noise_std == pytest.approx(
        np.full(31, 0.2)
    )
    assert trace_of(result, 1).noise_std == pytest.approx(2e-3 * np.abs(trace_of(result, 1).data))


@pytest.mark.parametrize("quantity", ["scattering", "transfer", "admittance"])
def test_other_quantities_have_their_own_scale(build, quantity):
    result = build(points=61)
    responses = tuple(replace(r, quantity=quantity, termination="") for r in result.responses)
    magnitude = plot_response(replace(result, responses=responses), 0)[0]
    symbol = {"scattering": "|S| in dB", "transfer": "|H| in dB", "admittance": "|Y|"}[quantity]
    assert magnitude.get_ylabel() == symbol
    plot_overview(replace(result, responses=responses))


def test_nodes_show_the_sign_in_words_and_direction(unstable):
    ax = plot_nodes(unstable, 0)
    labels = [t.get_text() for t in ax.get_yticklabels()]
    assert labels[0] == "drain1 (worse)"
    assert labels[1] == "drain2"
    widths = [bar.get_width() for bar in ax.patches]
    assert widths[0] < 0 < widths[1]
    assert [abs(w) for w in widths] == sorted((abs(w) for w in widths), reverse=True)


def test_nodes_without_leverage_show_residues(unstable):
    bare = tuple(replace(v, leverage=None) for v in unstable.modes[0].nodes)
    ax = plot_nodes(replace(unstable, modes=(replace(unstable.modes[0], nodes=bare),)), 0)
    assert ax.get_xlabel() == "residue relative to the strongest"
    assert ax.patches[0].get_width() == 1.0


def test_many_nodes_are_cut_and_counted(build):
    result = build(nodes=tuple(f"n{i}" for i in range(30)), points=31)
    ax = plot_nodes(result, 0)
    assert len(ax.patches) == 12
    assert "and 18 weaker" in texts(figure_of(ax))
    assert len(plot_overview(result).axes) == 30


def test_detection_hatches_where_every_node_is_blind(unstable):
    found = unstable.detection
    blind = replace(unstable, detection=replace(found, blind_everywhere_hz=((20e6, 50e6),)))
    ax = plot_detection(blind)
    hatched = [p for p in ax.patches if p.get_hatch()]
    assert [(p.get_x(), p.get_x() + p.get_width()) for p in hatched] == [(20e6, 50e6)]
    assert "every node blind" in texts(figure_of(ax))
    assert not [p for p in plot_detection(unstable).patches if p.get_hatch()]


def test_detection_of_nothing_can_be_drawn(unstable):
    found = unstable.detection
    nothing = replace(found, residue=np.full_like(found.residue, np.inf))
    drawing.figure_bytes(figure_of(plot_detection(replace(unstable, detection=nothing))), "png", 40)


def test_detection_shows_limits_and_modes_in_decibels_of_the_response(build):
    """One channel with a flat response of 10 Ω: a peak of 0.1 Ω is at −40 dB, one of 1 Ω at −20."""
    result = build(nodes=("gate2",))
    found, mode = result.detection, result.modes[0]
    omega = 2 * np.pi * found.frequency_hz[:, None]
    flat = replace(
        found,
        residue=0.1 * omega * 0.01 / np.sqrt(1 - 0.01**2),
        response=np.full_like(found.residue, 10.0),
    )
    view = replace(mode.nodes[0], residue=1.0 * abs(mode.pole_rad_per_s.real) + 0j)
    result = replace(result, modes=(replace(mode, nodes=(view,)),), detection=flat)
    curve, mark = [line for line in plot_detection(result).lines if line.get_zorder() != 1]
    assert np.allclose(curve.get_ydata(), -40)
    assert mark.get_ydata() == pytest.approx([-20])
    assert mark.get_xdata() == pytest.approx([mode.frequency_hz.value])


def test_many_channels_leave_the_detection_readable(build):
    result = build(nodes=tuple(f"n{i}" for i in range(30)), points=31)
    legend = plot_detection(result).get_legend()
    shown = [entry.get_text() for entry in legend.get_texts()]
    assert "single nodes" in shown
    assert "the best node" in shown
    assert len(shown) <= 6


def test_wrong_arguments_are_refused(unstable, tmp_path):
    with pytest.raises(ArgumentError, match="loop_index: 7"):
        plot_nodes(unstable, 7)
    with pytest.raises(ArgumentError, match="'nowhere' is not among gate2, drain1"):
        plot_response(unstable, "nowhere")
    with pytest.raises(ArgumentError, match="no detection limit"):
        plot_detection(replace(unstable, detection=None))
    with pytest.raises(ArgumentError, match="'gif' is not known; use png, svg, pdf"):
        save_figures(unstable, tmp_path, ["gif"])
    with pytest.raises(ArgumentError, match="none"):
        save_figures(unstable, tmp_path, [])
    assert not list(tmp_path.iterdir())


def test_saved_files(build, tmp_path):
    result = build(nodes=("gate2", "a/../b"), points=31)
    written = save_figures(result, tmp_path / "new", ("png", "svg", "pdf"))
    names = {p.stem for p in written}
    assert names == {
        "poles", "nodes-1", "overview", "detection",
        "response-1-gate2", "response-2-a_b",
    }  # fmt: skip
    assert {p for p in (tmp_path / "new").iterdir()} == set(written)
    with Image.open(tmp_path / "new" / "poles.png") as picture:
        assert picture.size == (1080, 660)
    assert (tmp_path / "new" / "poles.pdf").read_bytes().startswith(b"%PDF")
    assert b"<svg" in (tmp_path / "new" / "poles.svg").read_bytes()


def test_the_same_figure_gives_the_same_bytes(build):
    result = build(nodes=("gate2",), points=31)
    for kind in ("png", "svg", "pdf"):
        first, second = (
            drawing.figure_bytes(figure_of(plot_poles(result)), kind) for _ in range(2)
        )
        assert first == second


def test_unwritable_directory_is_named(unstable, tmp_path):
    (tmp_path / "file").write_text("")
    with pytest.raises(FileError, match="cannot be written"):
        save_figures(unstable, tmp_path / "file")


def test_hostile_names_are_drawn_literally(build):
    result = build(nodes=HOSTILE, points=31)
    for _, figure in figures_of(result):
        drawing.figure_bytes(figure, "png", dpi=40)
    shown = texts(figure_of(plot_nodes(result, 0)))
    assert any("$a_b^$" in t for t in shown)
    assert any("_hidden" in t for t in texts(figure_of(plot_detection(build(nodes=HOSTILE[:4])))))


def test_thinning_keeps_every_peak():
    x = np.linspace(0, 1, 100_000)
    y = np.sin(40 * x)
    y[54_321], y[77_777] = 9.0, -9.0
    kept_x, kept = drawing.thin(x, y, 500)
    assert kept.size <= 500
    assert kept.max() == 9.0
    assert kept.min() == -9.0
    assert np.all(np.diff(kept_x) > 0)
    assert drawing.thin(x[:10], y[:10], 500)[0].size == 10


def test_long_sweeps_make_small_figures(build):
    """100,000 points: the figure must not grow with the data."""
    result = build(nodes=("gate2",), points=100_000)
    assert len(drawing.figure_bytes(figure_of(plot_response(result, 0)[0]), "svg")) < 600_000


def test_one_point_and_zero_frequency_are_drawn(build):
    result = build(nodes=("gate2",), points=31)
    single = replace(result, responses=(result.responses[0].in_band(0.0, 0.02e9),))
    direct = replace(
        result.responses[0],
        frequency_hz=np.concatenate([[0.0], result.responses[0].frequency_hz[1:]]),
    )
    for odd in (single, replace(result, responses=(direct,))):
        for axes in (plot_response(odd, 0)[0], plot_poles(odd)):
            drawing.figure_bytes(figure_of(axes), "png", 40)


def test_zeros_in_the_data_are_left_out(build):
    result = build(nodes=("gate2",), points=31)
    values = result.responses[0].values.copy()
    values[4] = 0
    odd = replace(result, responses=(replace(result.responses[0], values=values),))
    drawing.figure_bytes(figure_of(plot_response(odd, 0)[0]), "png", 40)
    values[:] = 0
    odd = replace(result, responses=(replace(result.responses[0], values=values),))
    drawing.figure_bytes(figure_of(plot_response(odd, 0)[0]), "png", 40)


def test_png_is_readable(unstable):
    """An image with content: more than one colour, mostly paper."""
    with Image.open(io.BytesIO(drawing.figure_bytes(figure_of(plot_poles(unstable)), "png"))) as im:
        pixels = np.asarray(im.convert("L"))
    assert 0.005 < np.mean(pixels < 128) < 0.2
