"""Verdicts on interactions over studies: the rules of the method sheet, 8.7, on studies made for each."""

from __future__ import annotations

import pytest
from scipy import stats

from registry.analysis.undefined import Undefined
from registry.synthesis.contributions import Contribution
from registry.synthesis.recurrence import Recurrence, board
from tests.support.series import Trial, contribution, mean_of, readings_of

CROSSED = {"walk": ("a", "b"), "start": ("front", "back")}
MARGIN = 0.8


def even_trials(effect: float, *, noise: int = 4, per_cell: int = 8) -> list[Trial]:
    """Give a balanced 2 × 2 set of trials whose interaction contrast is exactly ``effect``, with a known spread."""
    return [
        (
            {"walk": walk, "start": start},
            300 + (round(10 * effect) if (walk, start) == ("b", "back") else 0) + (noise if turn % 2 else -noise),
        )
        for walk in CROSSED["walk"]
        for start in CROSSED["start"]
        for turn in range(per_cell)
    ]


def study(key: str, effect: float, *, noise: int = 4) -> Contribution:
    """Make such a study, which reached its size."""
    return contribution(key, even_trials(effect, noise=noise), CROSSED)


def only(studies: list[Contribution], *, margin: float = MARGIN) -> Recurrence:
    (found,) = board(studies, margin=margin).recurrences
    return found


@pytest.mark.parametrize(
    ("effects", "verdict"),
    [
        ((2.0,), "single"),
        ((0.0, 0.1, 0.0, -0.1), "small"),
        ((0.2, 0.2, 0.2, 0.2, 0.2), "small"),  # Small before seen again, however sure each study is.
        ((2.0, 2.2, -2.0), "opposite"),
        ((2.0, 2.2, 1.9), "seen_again"),
        ((-2.0, -2.2, 0.0, 0.1), "seen_again"),
        ((2.5, 0.0, 0.1), "once"),
    ],
)
def test_the_first_rule_that_fits_gives_the_verdict(effects: tuple[float, ...], verdict: str) -> None:
    found = only([study(str(at), effect) for at, effect in enumerate(effects)])

    assert found.verdict == verdict


def test_studies_too_noisy_to_say_are_not_settled() -> None:
    found = only([study(str(at), effect, noise=40) for at, effect in enumerate((0.5, -0.4, 1.0))])

    assert found.verdict == "unsettled"
    assert (found.counts.up, found.counts.down, found.counts.nil) == (0, 0, 0)


def test_an_estimate_is_the_second_difference_less_the_first() -> None:
    # Contract section 3: (second - first of the first factor at the second of the second) less the same at its first.
    found = only([study("1", 1.5)])

    assert found.corners == {
        "walk": (("walk", "a"), ("walk", "b")),
        "start": (("start", "front"), ("start", "back")),
    }
    assert found.each[0].evidence.estimate.estimate == pytest.approx(1.5, rel=1e-12)


def test_a_study_is_judged_by_its_own_t_one_sided() -> None:
    (shown,) = only([study("1", 0.6)]).each

    estimate = shown.evidence.estimate
    assert isinstance(estimate.se, float)
    assert isinstance(estimate.df, float)
    # Spread .4 exactly: within a cell the sum of squares is 8 · .4², on 7 degrees of freedom; se² = 4 s² / 8.
    s2 = 4 * 8 * 0.16 / 28
    assert estimate.se == pytest.approx((4 * s2 / 8) ** 0.5, rel=1e-12)
    t = 0.6 / estimate.se
    assert shown.evidence.p_up == pytest.approx(stats.t.sf(t, 28), rel=1e-9)
    assert shown.evidence.p_down == pytest.approx(stats.t.cdf(t, 28), rel=1e-9)
    # The larger of the two one-sided tests against the margin (Schuirmann 1987).
    assert shown.evidence.p_small == pytest.approx(stats.t.cdf((0.6 - MARGIN) / estimate.se, 28), rel=1e-9)


def test_a_study_counts_as_small_exactly_when_its_own_interval_lies_within_the_margin() -> None:
    for effect in (0.0, 0.3, 0.36, 0.37, 0.38, 0.39, 0.4, 0.41, 0.6):
        (shown,) = only([study("1", effect)]).each
        lower, upper = shown.evidence.estimate.lower, shown.evidence.estimate.upper
        assert isinstance(lower, float)
        assert isinstance(upper, float)
        assert (shown.evidence.p_small <= 0.025) == (lower > -MARGIN and upper < MARGIN), effect


def test_r_values_are_adjusted_over_the_whole_board() -> None:
    crossed = {"walk": ("a", "b", "c"), "start": ("front", "back")}
    studies = [contribution(str(seed), readings_of(crossed, seed=seed), crossed) for seed in range(4)]

    found = board(studies, margin=MARGIN).recurrences

    raw = []
    for each in found:
        up = sorted(shown.evidence.p_up for shown in each.each)[1:]
        down = sorted(shown.evidence.p_down for shown in each.each)[1:]
        raw.append(min(1.0, 2 * min(stats.combine_pvalues(p, method="fisher").pvalue for p in (up, down))))
    expected = stats.false_discovery_control(raw)
    assert [each.r_value for each in found] == pytest.approx(list(expected), rel=1e-9)


def test_common_ground_is_found_for_each_contrast_over_the_studies_that_have_its_corners() -> None:
    narrow = {"walk": ("a", "b"), "start": ("front", "back"), "batch": ("4", "8")}
    wide = {"walk": ("a", "b", "c"), "start": ("front", "back"), "batch": ("8", "12")}
    studies = [
        contribution("narrow", readings_of(narrow, seed=1), narrow),
        contribution("wide", readings_of(wide, seed=2), wide),
    ]

    found = board(studies, margin=MARGIN)

    by_levels = {
        tuple(level for pair in each.corners.values() for _, level in pair): each for each in found.recurrences
    }
    both, one = by_levels["a", "b", "front", "back"], by_levels["a", "c", "front", "back"]
    assert [shown.study for shown in both.each] == ["narrow", "wide"]
    assert [caveat.code for caveat in both.caveats] == ["slice"]
    assert [shown.study for shown in one.each] == ["wide"]
    assert one.caveats == ()
    # Nobody ran 4 beside 12, so those corners are named as left out.
    left_out = {tuple(level for pair in each.corners.values() for _, level in pair) for each in found.omitted}
    assert ("a", "b", "4", "12") in left_out


def test_a_study_with_an_empty_corner_is_named_and_does_not_count() -> None:
    trials = [(at, steps) for at, steps in readings_of(CROSSED, seed=3) if at != {"walk": "b", "start": "back"}]
    studies = [study("full", 2.0), contribution("holed", trials, CROSSED)]

    found = only(studies)

    assert ([shown.study for shown in found.each], found.silent, found.verdict) == (["full"], ("holed",), "single")


def test_a_study_that_never_ran_a_corner_does_not_narrow_the_ground_of_the_others() -> None:
    wide = {**CROSSED, "batch": ("4", "8")}
    holed = [(at, steps) for at, steps in readings_of(CROSSED, seed=6) if at != {"walk": "b", "start": "back"}]
    trials = readings_of(wide, seed=5)
    studies = [
        contribution("wide", trials, wide),
        contribution("holed", holed, CROSSED, held={"batch": "8"}),
    ]

    found = next(each for each in board(studies, margin=MARGIN).recurrences if set(each.corners) == set(CROSSED))

    (shown,) = found.each
    corners = {
        (walk, start): sum(mean_of(trials, walk=walk, start=start, batch=batch) for batch in wide["batch"]) / 20
        for walk in wide["walk"]
        for start in wide["start"]
    }
    expected = corners["b", "back"] - corners["a", "back"] - corners["b", "front"] + corners["a", "front"]
    assert shown.evidence.estimate.estimate == pytest.approx(expected, rel=1e-9)
    assert (found.silent, found.caveats) == (("holed",), ())


@pytest.mark.parametrize(("standing", "judged"), [("early", False), ("extended", False), ("exploratory", False)])
def test_a_study_that_may_not_judge_is_shown_and_neither_counts_nor_pools(standing: str, *, judged: bool) -> None:
    trials = readings_of(CROSSED, seed=4, per_cell=6)
    other = contribution("other", trials, CROSSED, standing=standing)  # type: ignore[arg-type]

    found = only([study("1", 2.0), study("2", 2.1), other])

    (shown,) = [shown for shown in found.each if shown.study == "other"]
    assert shown.evidence.counts is judged
    assert (shown.evidence.p_up, shown.evidence.p_down, shown.evidence.p_small) == (1.0, 1.0, 1.0)
    assert isinstance(shown.evidence.estimate.lower, Undefined)
    assert not isinstance(found.pooled, Undefined)
    assert found.pooled.studies == 2


def test_a_study_closed_early_brings_the_chance_that_holds_at_any_moment_once_it_may_speak() -> None:
    trials = even_trials(2.0, per_cell=24)
    early = contribution("early", trials, CROSSED, standing="early", per_cell=40, tuning=8.212)
    full = contribution("full", trials, CROSSED)

    (anytime,), (ordinary,) = only([early]).each, only([full]).each

    assert anytime.evidence.counts
    assert anytime.evidence.p_down == 1.0
    assert ordinary.evidence.p_up < anytime.evidence.p_up < 1e-6
    widths = [
        shown.evidence.estimate.upper - shown.evidence.estimate.lower  # type: ignore[operator]
        for shown in (anytime, ordinary)
    ]
    # Method sheet 5.3: about 1.6 times as wide as the ordinary interval around the planned end.
    assert 1.4 < widths[0] / widths[1] < 1.8


def test_every_study_small_is_told_from_small_overall() -> None:
    each = only([study(str(at), 0.0) for at in range(3)])
    overall = only([study("1", 0.0), study("2", 0.0), study("3", 0.35, noise=8), study("4", 0.0)])

    assert (each.verdict, each.small_in_each) == ("small", True)
    assert (overall.verdict, overall.small_in_each) == ("small", False)
