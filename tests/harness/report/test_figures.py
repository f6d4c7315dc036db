import itertools
import os
import pickle
import subprocess
import sys
from dataclasses import replace

import matplotlib as mpl
import numpy as np
import pandas as pd
import pytest

from harness.report.figures import (
    all_figures,
    figures_against,
    metric_against,
    over_time,
    save_figure,
    side_by_side,
    track_loss_over_clutter,
)
from harness.report.style import RC, house_style, looks
from metrics.consistency import chi_square_mean_bounds

DENSITY = "scene.sensor.clutter_density_per_m2"
DETECTION = "scene.sensor.detection_probability"
NOISE = "scene.sensor.noise_sd_m"


def texts_of(figure):
    return [text.get_text() for text in figure.findobj(mpl.text.Text) if text.get_text()]


def title_of(figure):
    bold = [text.get_text() for text in figure.texts if text.get_weight() == "bold"]
    return " ".join(bold).replace("\u00a0", " ")


def points_of(axes, colour, hollow):
    """Points drawn with markers of this colour, as (x, y) rows."""
    lines = [
        line
        for line in axes.lines
        if line.get_marker() not in ("", "None")
        and line.get_color() == colour
        and line.get_linestyle() == "None"
        and (line.get_markerfacecolor() == "white") == hollow
        and line.get_transform().contains_branch(axes.transData)
    ]
    return np.concatenate([line.get_xydata() for line in lines] or [np.empty((0, 2))])


def beyond_the_axes(figure):
    """Labels of ticks that lie outside the limits; they exist but are not drawn."""
    return {
        tick.label1
        for axes in figure.axes
        for axis in (axes.xaxis, axes.yaxis)
        for tick in axis.get_major_ticks()
        if not min(axis.get_view_interval()) <= tick.get_loc() <= max(axis.get_view_interval())
    }


def assert_texts_are_apart_and_inside(figure):
    """Boxes of all texts as the PNG writer would draw them, one pixel of slack."""
    with house_style():
        renderer = figure._get_renderer()
        figure.draw(renderer)
        beyond = beyond_the_axes(figure)
        boxes = [
            (text.get_text(), text.get_window_extent(renderer))
            for text in figure.findobj(mpl.text.Text)
            if text.get_text().strip() and text not in beyond
        ]
    shown = [(text, box) for text, box in boxes if box.width > 0]
    assert len(shown) > 5
    page = figure.bbox
    for text, box in shown:
        inside = (
            box.x0 >= page.x0 - 1
            and box.x1 <= page.x1 + 1
            and box.y0 >= page.y0 - 1
            and box.y1 <= page.y1 + 1
        )
        assert inside, f"{text!r} leaves the page"
    for place, (text, box) in enumerate(shown):
        for other, other_box in shown[place + 1 :]:
            across = min(box.x1, other_box.x1) - max(box.x0, other_box.x0)
            down = min(box.y1, other_box.y1) - max(box.y0, other_box.y0)
            # Boxes of text hold room for letters that reach below the line.
            assert across <= 1 or down <= 3, f"{text!r} covers {other!r}"


DRAWN = {
    "three keys": lambda get: metric_against(get("study"), "track_loss_rate", DENSITY),
    "row heads in two lines": lambda get: metric_against(get("study"), "anees", NOISE),
    "one key": lambda get: metric_against(get("one_key"), "rmse_position", DENSITY),
    "no numbers": lambda get: metric_against(get("not_a_number"), "gospa", "motion"),
    "many words": lambda get: metric_against(get("many_words"), "gospa", "motion"),
    "one strategy": lambda get: metric_against(get("one_strategy"), "track_loss_rate", DETECTION),
    "many values": lambda get: metric_against(
        get("thousand_cases"), "track_loss_rate", DENSITY, {NOISE: 10.0}
    ),
    "nothing held": lambda get: metric_against(get("all_lost"), "rmse_position", DENSITY),
    "over time": lambda get: over_time(get("study")),
    "over time, nothing held": lambda get: over_time(get("all_lost")),
    "one condition": lambda get: side_by_side(get("no_sweep")),
    "long names": lambda get: metric_against(get("long_names"), "track_loss_rate", DENSITY),
    "many names": lambda get: metric_against(get("many_names"), "track_loss_rate", DENSITY),
}


@pytest.fixture
def many_words(invent):
    motions = ["nearly-constant-velocity", "coordinated-turn", "nearly-constant-acceleration"]
    return invent(sweep={"scene.target.motion": motions, NOISE: [5.0, 10.0, 20.0]})


@pytest.fixture
def long_names(one_key):
    return renamed(one_key, {"pda": "a-name_of.sixty+letters-that_goes.on+and-on_until.it+is-full"})


@pytest.fixture
def many_names(invent):
    """Fourteen strategies, more than have room beside a panel."""
    parts = [
        renamed(invent(sweep={DENSITY: [1e-5, 1e-4], NOISE: [5.0, 9.0, 20.0]}), suffix)
        for suffix in (
            {},
            {name: f"{name} two" for name in ("nearest", "probable", "pda", "mixture")},
            {name: f"{name} three" for name in ("nearest", "probable", "pda", "mixture")},
        )
    ]
    strategies = {}
    for part in parts:
        strategies |= part.document["strategies"]
    summary = pd.concat([part.summary for part in parts]).drop_duplicates(
        [DENSITY, NOISE, "strategy"]
    )
    document = {**parts[0].document, "strategies": strategies}
    return replace(parts[0], summary=summary, document=document)


def renamed(results, names):
    strategies = results.document["strategies"]
    return replace(
        results,
        summary=results.summary.replace({"strategy": names}),
        scans=results.scans.replace({"strategy": names}),
        document={
            **results.document,
            "strategies": {names.get(name, name): kind for name, kind in strategies.items()},
        },
    )


@pytest.mark.parametrize("drawn", DRAWN)
def test_no_text_covers_another_or_leaves_the_page(request, drawn):
    figure = DRAWN[drawn](request.getfixturevalue)
    assert figure.get_figwidth() == pytest.approx(16 / 2.54, abs=0.01)
    assert_texts_are_apart_and_inside(figure)


def test_a_zero_rate_is_hollow_at_the_lower_edge_with_its_upper_bound(one_key):
    """0 of 400 has Wilson's upper end z²/(n + z²) = 0.9512 %."""
    (axes,) = track_loss_over_clutter(one_key).axes
    known = looks(one_key)["known"].colour
    hollow = points_of(axes, known, hollow=True)
    assert len(hollow) == 5
    assert hollow[:, 1] == pytest.approx(axes.get_ylim()[0])
    bars = [c for c in axes.collections if np.allclose(c.get_color()[0, :3], 0.0)]
    tops = [segment[1, 1] for segment in bars[0].get_segments()]
    assert tops == pytest.approx([0.95123] * 5, abs=1e-5)
    assert len(points_of(axes, known, hollow=False)) == 0


def test_points_and_bars_are_the_summary(one_key):
    (axes,) = metric_against(one_key, "rmse_position", DENSITY).axes
    for name, look in looks(one_key).items():
        cases = one_key.summary[one_key.summary["strategy"] == name]
        points = points_of(axes, look.colour, hollow=False)
        assert points[:, 1] == pytest.approx(cases["rmse_position"].to_numpy())
        # Strategies stand side by side, within a few hundredths of the axis.
        decades = np.log10(axes.get_xlim()[1] / axes.get_xlim()[0])
        assert np.abs(np.log10(points[:, 0] / cases[DENSITY])).max() < 0.04 * decades
        bars = next(
            c
            for c in axes.collections
            if np.allclose(c.get_color()[0], mpl.colors.to_rgba(look.colour))
        )
        ends = np.array([segment[:, 1] for segment in bars.get_segments()])
        expected = cases[["rmse_position_low", "rmse_position_high"]].to_numpy()
        assert ends == pytest.approx(expected)


def test_densities_and_rates_have_logarithmic_axes(study, invent):
    loss = metric_against(study, "track_loss_rate", DENSITY).axes[0]
    assert (loss.get_xscale(), loss.get_yscale()) == ("log", "log")
    close = invent(sweep={DENSITY: [1e-4, 2e-4]}, strategies=("pda",))
    assert metric_against(close, "gospa", DENSITY).axes[0].get_xscale() == "log"
    calibration = metric_against(study, "anees", DETECTION).axes[0]
    assert calibration.get_xscale() == "linear"


def test_a_density_of_zero_has_a_linear_axis(invent):
    results = invent(sweep={DENSITY: [0.0, 1e-4, 3e-4]})
    assert metric_against(results, "gospa", DENSITY).axes[0].get_xscale() == "linear"


def test_every_axis_label_has_its_unit(study):
    figure = metric_against(study, "track_loss_rate", DENSITY)
    labels = {axes.get_xlabel() for axes in figure.axes} | {
        axes.get_ylabel() for axes in figure.axes
    }
    assert labels == {"", "clutter density [1/m²]", "track loss [%]"}


def test_two_keys_make_rows_and_columns_that_share_their_axes(study):
    figure = metric_against(study, "rmse_position", DENSITY)
    assert len(figure.axes) == 9
    assert len({axes.get_ylim() for axes in figure.axes}) == 1
    assert len({axes.get_xlim() for axes in figure.axes}) == 1
    texts = [text.replace("\u00a0", " ") for text in texts_of(figure)]
    for head in ("noise sd 5 m", "noise sd 20 m", "detection probability 0.95"):
        assert texts.count(head) == 1


def test_keys_in_step_make_no_panels(study):
    rows = (study.summary[DENSITY].rank(method="dense")) == study.summary[NOISE].rank(
        method="dense"
    )
    scans = study.scans[DENSITY].rank(method="dense") == study.scans[NOISE].rank(method="dense")
    in_step = replace(study, summary=study.summary[rows], scans=study.scans[scans])
    figure = metric_against(in_step, "track_loss_rate", DENSITY)
    assert len(figure.axes) == 3
    assert "(noise sd in step with it)" in " ".join(texts_of(figure))


def test_one_setting_of_several_strategies_in_step_has_one_name(invent):
    keys = [f"strategies.{name}.max_components" for name in ("mixture", "pda")]
    grid = invent(sweep={key: [5, 10, 20] for key in keys})
    rows, scans = (frame[keys[0]] == frame[keys[1]] for frame in (grid.summary, grid.scans))
    in_step = replace(grid, summary=grid.summary[rows], scans=grid.scans[scans])
    name = "max components of mixture and pda"
    for figure in all_figures(in_step).values():
        texts = " ".join(text.replace("\u00a0", " ") for text in texts_of(figure))
        assert name in texts
        assert "in step with" not in texts
    assert metric_against(in_step, "anees", keys[1]).axes[0].get_xlabel() == name
    apart = metric_against(grid, "anees", keys[0])
    assert apart.axes[0].get_xlabel() == "max components of mixture"


def test_points_without_a_loss_are_explained_where_there_are_some(one_key):
    told = "hollow, at the lower edge with pale lines to it: none"
    assert told in " ".join(texts_of(metric_against(one_key, "track_loss_rate", DENSITY)))
    summary = one_key.summary[one_key.summary["lost"] > 0]
    without = metric_against(replace(one_key, summary=summary), "track_loss_rate", DENSITY)
    assert "hollow" not in " ".join(texts_of(without))


def test_over_time_tells_how_its_conditions_were_chosen_and_where_none_is_lost(study, one_key):
    chosen = "easiest to hardest: by the candidates' mean track loss"
    assert chosen in " ".join(texts_of(over_time(study)))
    setting = {DENSITY: float(study.summary[DENSITY].max()), DETECTION: 0.6, NOISE: 20.0}
    assert chosen not in " ".join(texts_of(over_time(study, [setting])))
    edge = "along the lower edge: none lost yet"
    assert edge in " ".join(texts_of(over_time(one_key)))
    some = replace(one_key, scans=one_key.scans.assign(lost=0.1))
    assert edge not in " ".join(texts_of(over_time(some)))


def test_over_time_tells_the_errors_where_no_track_is_lost(one_key):
    summary = one_key.summary.assign(lost=0, track_loss_rate=0.0)
    title = title_of(over_time(replace(one_key, summary=summary)))
    rivals = summary[(summary[DENSITY] > 9e-4) & (summary["strategy"] != "known")]
    worst = rivals.loc[rivals["rmse_position"].idxmax()]
    assert title.startswith(f"No strategy loses a track; {worst['strategy']} errs by ")
    assert float(title.split("errs by ")[1].split(" ")[0]) == pytest.approx(
        worst["rmse_position"], rel=0.05
    )


def test_the_title_is_the_finding_and_the_subtitle_the_conditions(study, one_key):
    assert title_of(metric_against(study, "track_loss_rate", DENSITY)) == (
        "mixture and particles are each best or not told apart from the best in 27 of 27 "
        "conditions; particles loses 3.11 % of all tracks against 13.1 % with nearest"
    )
    figure = track_loss_over_clutter(one_key)
    assert title_of(figure).startswith("mixture and particles hold 95 % of tracks up to ")
    subtitle = " ".join(texts_of(figure)).replace("\u00a0", " ")
    for part in ("40 scans; noise sd 10 m; detection probability 0.85;", "400 trials a case"):
        assert part in subtitle


def test_the_candidates_pooled_loss_in_the_title_is_that_of_the_summary(study):
    cases = study.summary[study.summary["strategy"] == "nearest"]
    pooled = 100 * cases["lost"].sum() / cases["trials"].sum()
    assert f"{pooled:.1f} % with nearest" in title_of(
        metric_against(study, "track_loss_rate", NOISE)
    )


def test_every_strategy_is_named_at_the_end_of_its_curve(study):
    figure = metric_against(study, "anees", DENSITY)
    for place, axes in enumerate(figure.axes):
        names = {text.get_text() for text in axes.texts}
        assert names == (set(study.strategies) if place % 3 == 2 else set())


def test_over_time_has_the_easiest_the_middle_and_the_hardest_condition(study):
    figure = over_time(study)
    assert len(figure.axes) == 9
    heads = [text.replace("\u00a0", " ") for text in texts_of(figure)]
    assert [word for word in heads if word in ("easiest", "middle", "hardest")] == [
        "easiest",
        "middle",
        "hardest",
    ]
    hardest = study.summary.groupby([DENSITY, DETECTION, NOISE])["track_loss_rate"].mean().idxmax()
    assert hardest == (pytest.approx(3e-4), 0.6, 20.0)
    assert heads.count("detection probability 0.6") == 1
    case = study.summary[study.summary["strategy"] == "nearest"].iloc[8 + 12]
    assert case[DENSITY] == pytest.approx(3e-4)
    assert title_of(figure).startswith(
        f"nearest has lost {100 * case['track_loss_rate']:.0f} % of its tracks in the hardest"
    )


def test_over_time_draws_the_scans_and_the_bounds_of_who_holds_most(study):
    setting = {DENSITY: float(study.summary[DENSITY].max()), DETECTION: 0.6, NOISE: 20.0}
    figure = over_time(study, [setting])
    error, nees, lost = figure.axes
    one = study.scans
    for key, level in setting.items():
        one = one[np.isclose(one[key], level, rtol=1e-9)]
    mixture = one[one["strategy"] == "mixture"]
    colour = looks(study)["mixture"].colour
    for axes, column, scale in (
        (error, "rmse_position", 1),
        (nees, "nees", 1),
        (lost, "lost", 100),
    ):
        drawn = [line for line in axes.lines if len(line.get_xdata()) == 40]
        line = next(line for line in drawn if line.get_color() == colour)
        assert line.get_xdata() == pytest.approx(mixture["time_s"].to_numpy())
        assert line.get_ydata() == pytest.approx(scale * mixture[column].to_numpy())
    low, high = chi_square_mean_bounds(4, 400)  # known association holds all
    corners = nees.collections[0].get_paths()[0].vertices[:, 1]
    assert (corners.min(), corners.max()) == pytest.approx((low, high))
    assert nees.get_ylabel() == "NEES (4 expected)"


def test_a_long_run_is_drawn_with_few_points(invent):
    results = invent(sweep={}, scans=3000)
    line = max(over_time(results).axes[0].lines, key=lambda line: len(line.get_xdata()))
    assert len(line.get_xdata()) <= 400


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ([{"noise_sd_m": 5.0}], r"leaves 9 conditions; give a value of each of scene\.sensor"),
        ([{"noise_sd_m": 6.0}], r"no condition with noise_sd_m = 6\.0"),
        ([], "give 1 to 4 conditions, got 0"),
        ([{}] * 5, "give 1 to 4 conditions, got 5"),
    ],
)
def test_conditions_over_time_must_be_single_ones(study, settings, message):
    with pytest.raises(ValueError, match=message):
        over_time(study, settings)


def test_too_many_panels_are_refused_with_what_to_fix(thousand_cases):
    with pytest.raises(ValueError, match=r"would take 14 panels, more than 12; fix the value of"):
        metric_against(thousand_cases, "anees", DENSITY)


def test_strategies_are_no_axis(study):
    with pytest.raises(ValueError, match="strategies are curves"):
        metric_against(study, "anees", "strategy")


def test_loss_over_clutter_needs_clutter_in_the_sweep(not_a_number):
    with pytest.raises(
        ValueError, match=r"does not sweep clutter; it sweeps scene\.target\.motion"
    ):
        track_loss_over_clutter(not_a_number)


def test_many_panels_are_split_by_the_key_that_needs_fewest_figures(thousand_cases):
    figures = figures_against(thousand_cases, "track_loss_rate", "clutter_density_per_m2")
    assert list(figures) == [
        "track_loss_over_clutter_density_at_noise_sd_5_m",
        "track_loss_over_clutter_density_at_noise_sd_10_m",
    ]
    assert [len(figure.axes) for figure in figures.values()] == [7, 7]
    by_noise = figures_against(thousand_cases, "track_loss_rate", NOISE)
    assert list(by_noise) == [
        f"track_loss_over_noise_sd_at_detection_probability_{pd}" for pd in (0.5, 0.7, 0.9, 0.99)
    ]


def test_figures_split_by_texts_have_names_of_their_own(invent):
    results = invent(
        sweep={
            "scene.sensor.region_m": [[[0.0, float(end)]] for end in range(12)],
            "scene.sensor.site": ["+", "&"],
            NOISE: [5.0, 10.0],
        },
        strategies=("pda",),
        trials=100,
        scans=2,
    )
    figures = figures_against(results, "anees", NOISE)
    assert list(figures) == ["anees_over_noise_sd_at_site", "anees_over_noise_sd_at_site_2"]


@pytest.mark.parametrize(
    ("kind", "names"),
    [
        (
            "study",
            [
                "track_loss_over_clutter_density",
                "position_rmse_over_clutter_density",
                "anees_over_clutter_density",
                "track_loss_over_detection_probability",
                "track_loss_over_noise_sd",
                "over_time",
            ],
        ),
        ("no_sweep", ["strategies", "over_time"]),
        (
            "not_a_number",
            [
                "track_loss_over_motion",
                "position_rmse_over_motion",
                "anees_over_motion",
                "over_time",
            ],
        ),
    ],
)
def test_a_run_leaves_a_handful_of_figures(request, kind, names):
    assert list(all_figures(request.getfixturevalue(kind))) == names


def test_equal_results_give_equal_files_in_another_process_too(no_sweep, tmp_path):
    """With another seed of Python's hashes, and other settings of the user's matplotlib."""
    pickled = tmp_path / "results"
    pickled.write_bytes(pickle.dumps(no_sweep))
    with mpl.rc_context({"font.size": 25, "axes.facecolor": "red", "svg.hashsalt": None}):
        ours = save_figure(over_time(no_sweep), tmp_path / "ours")
    script = (
        "import pickle, sys\n"
        "from harness.report.figures import over_time, save_figure\n"
        "results = pickle.loads(open(sys.argv[1], 'rb').read())\n"
        "save_figure(over_time(results), sys.argv[2])\n"
        "assert 'matplotlib.pyplot' not in sys.modules\n"
    )
    subprocess.run(
        [sys.executable, "-c", script, pickled, tmp_path / "theirs"],
        check=True,
        env={**os.environ, "PYTHONHASHSEED": "17"},
    )
    assert [path.suffix for path in ours] == [".svg", ".pdf", ".png"]
    for path in ours:
        assert path.read_bytes() == path.with_stem("theirs").read_bytes()


def test_files_embed_their_fonts_and_tell_no_date(no_sweep, tmp_path):
    """Type 42 fonts are TrueType programs, which PDF keeps as FontFile2 (ISO 32000-1, 9.9)."""
    svg, pdf = save_figure(side_by_side(no_sweep), tmp_path / "figure", ["svg", "pdf"])
    assert b"/FontFile2" in pdf.read_bytes()
    assert b"/Type3" not in pdf.read_bytes()
    assert b"CreationDate" not in pdf.read_bytes()
    assert b"<dc:date>" not in svg.read_bytes()
    assert b"<text" not in svg.read_bytes()


def test_formats_that_are_not_offered_are_refused(no_sweep, tmp_path):
    with pytest.raises(ValueError, match="written as svg, pdf, png, not as 'gif'"):
        save_figure(side_by_side(no_sweep), tmp_path / "figure", ["png", "gif"])
    assert not list(tmp_path.iterdir())


def test_matplotlib_is_imported_only_to_draw():
    script = (
        "import sys, harness.report, harness.report.tables, harness.report.figures\n"
        "assert 'matplotlib' not in sys.modules\n"
    )
    subprocess.run([sys.executable, "-c", script], check=True)


def test_drawing_leaves_the_users_settings_alone(no_sweep):
    before = dict(mpl.rcParams)
    side_by_side(no_sweep)
    assert dict(mpl.rcParams) == before
    assert before["font.size"] != 0
    assert not RC.items() <= before.items()


def test_a_strategy_looks_the_same_whatever_else_is_drawn(study):
    """By its place in the study; references are black and take no place."""
    look = looks(study)
    assert look["known"].colour == "#000000"
    assert looks(replace(study, summary=study.summary.iloc[:1])) == look
    strategies = study.document["strategies"]
    moved = {"known": strategies["known"], **strategies}
    assert looks(replace(study, document={**study.document, "strategies": moved})) == look


def test_sixty_strategies_all_look_different_and_neighbours_in_more_than_colour(study):
    document = {**study.document, "strategies": {str(n): {"kind": "pda"} for n in range(60)}}
    found = list(looks(replace(study, document=document)).values())
    assert len(set(found)) == 60
    for one, other in itertools.pairwise(found):
        assert one.colour != other.colour
        assert one.marker != other.marker
        assert one.line != other.line


def test_colours_are_those_published_by_okabe_and_ito(study):
    """Against the copy of the set that matplotlib carries."""
    document = {**study.document, "strategies": {str(n): {"kind": "pda"} for n in range(7)}}
    ours = {look.colour for look in looks(replace(study, document=document)).values()}
    published = {mpl.colors.to_hex(c).upper() for c in mpl.colormaps["okabe_ito"].colors}
    assert {colour.upper() for colour in ours} | {"#000000"} == published
