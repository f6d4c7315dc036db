"""Figures of whole posteriors: what they say, and that they take whatever results there are."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from harness.report.figures.default_set import all_figures
from harness.report.figures.save import save_figure

LEVELS = np.arange(1, 21) / 20
SURE = {"nearest": 0.16, "probable": 0.09}  # how far coverage falls short in the middle


def with_posteriors(results):
    """Invented calibration and gaps for every case, nearest and probable over-confident."""
    summary, scans = results.summary.copy(), results.scans.copy()
    gap = summary["strategy"].map({"nearest": 0.11, "probable": 0.08, "pda": 0.013}).fillna(4e-5)
    gap[summary["strategy"] == "mixture"] = 0.0
    for metric, scale in (("posterior_gap_ise", 1.0), ("posterior_gap_kl", 5.0)):
        summary[metric] = scale * gap
        summary[f"{metric}_low"], summary[f"{metric}_high"] = 0.8 * scale * gap, 1.2 * scale * gap
        by_case = summary[[*results.swept, "strategy", metric]]
        merged = scans.merge(by_case, on=[*results.swept, "strategy"], how="left")[metric]
        scans[metric] = merged.to_numpy() * (0.5 + 0.5 * scans["scan"] / scans["scan"].max())
    frames = []
    for case in summary.to_dict("records"):
        short = SURE.get(case["strategy"], 0.0)
        cover = LEVELS - 4 * short * LEVELS * (1 - LEVELS)
        share = np.full(20, 0.05) * (1 - short) + short * np.isin(np.arange(20), (0, 19)) / 2
        frame = {key: case[key] for key in (*results.swept, "strategy")}
        frame |= {"level": LEVELS, "transform_share": share, "coverage": cover}
        for name, half in (("transform_share", 0.012), ("coverage", 0.03)):
            value = frame[name]
            frame |= {f"{name}_low": value - half, f"{name}_high": np.minimum(1, value + half)}
        frames.append(pd.DataFrame(frame))
    document = {**results.document, "posterior_gap": {"reference": "mixture"}}
    calibration = pd.concat(frames, ignore_index=True)
    return replace(
        results, summary=summary, scans=scans, calibration=calibration, document=document
    )


def title_of(figure):
    return " ".join(text.get_text() for text in figure.texts if text.get_weight() == "bold")


@pytest.mark.parametrize("which", ["study", "no_sweep"])
def test_titles_name_who_is_over_confident_and_who_is_farthest(which, request):
    figures = all_figures(with_posteriors(request.getfixturevalue(which)))
    where = " in the hardest condition" if which == "study" else ""
    assert title_of(figures["transforms"]) == (
        f"The truth lies at the ends of nearest's posterior 2.4 times as often as it should{where}"
    )
    assert title_of(figures["coverage"]) == (
        f"90 % regions of nearest hold the target in 84 % of scans{where}; "
        "those of probable too rarely as well"
    ).replace("90 %", "90\u00a0%").replace("84 %", "84\u00a0%")
    farthest = ", where it is farthest" if which == "study" else ""
    assert title_of(figures["posterior_gap"]).replace("\u00a0", " ") == (
        "The posterior of nearest is 11.0 % from that of mixture, that of particles 0.0040 %"
        + farthest
    )


def test_there_is_a_histogram_for_every_strategy_and_its_bars_are_the_shares(no_sweep):
    results = with_posteriors(no_sweep)
    panels = all_figures(results)["transforms"].axes
    assert len(panels) == 6
    for name, panel in zip(results.strategies, panels, strict=True):
        own = results.calibration[results.calibration["strategy"] == name]
        heights = [bar.get_height() for bar in panel.patches]
        np.testing.assert_allclose(heights, 100 * own["transform_share"])


def test_the_reference_and_who_is_told_the_origins_have_no_curve_of_the_gap(no_sweep):
    panel = all_figures(with_posteriors(no_sweep))["posterior_gap"].axes[0]
    drawn = [text.get_text() for text in panel.texts]
    assert set(drawn) == {"nearest", "probable", "pda", "particles"}


def test_the_gap_is_drawn_against_what_is_swept_without_the_reference(one_key):
    figures = all_figures(with_posteriors(one_key))
    panel = figures["posterior_gap_squared_error_over_clutter_density"].axes[0]
    assert panel.get_ylabel() == "posterior gap, squared error [%]"
    assert {text.get_text() for text in panel.texts} == set(one_key.strategies) - {"mixture"}


def test_results_without_any_value_are_drawn_all_the_same(no_sweep, tmp_path):
    results = with_posteriors(no_sweep)
    calibration = results.calibration.copy()
    calibration.loc[:, calibration.columns.str.contains("share|coverage")] = np.nan
    scans, summary = results.scans.copy(), results.summary.copy()
    for frame in (scans, summary):
        frame.loc[:, frame.columns.str.startswith("posterior_gap")] = np.nan
    empty = replace(results, calibration=calibration, scans=scans, summary=summary)
    figures = all_figures(empty)
    assert "nothing to judge" in title_of(figures["coverage"])
    assert "no other posterior" in title_of(figures["posterior_gap"])
    for name in ("transforms", "coverage", "posterior_gap"):
        save_figure(figures[name], tmp_path / name, ["svg"])


def test_results_that_ask_for_nothing_have_none_of_these_figures(no_sweep):
    assert set(all_figures(no_sweep)) == {"strategies", "over_time"}
