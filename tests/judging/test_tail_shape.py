"""Likelihood ratios of normal scores: against other searches, sizes, size of effect, known truths."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.answers import Settings
from backtest.judging.censored import Sums, fit, implied_tail, likelihood_ratio, log_likelihood, sums_of
from backtest.judging.nulls import p_upper
from backtest.judging.tail_shape import TESTS, berkowitz_null, berkowitz_ratio, tail_ratio_null
from tests.reference.judging_tables import sample_of
from tests.reference.pit_laws import censored_log_likelihood, censored_ratio, regression_ratio

SETTINGS = Settings(0.05, 1999, 7)
JUDGE = {test.key: test.judge for test in TESTS}


def of_scores(z, level=0.975):
    pit = stats.norm.cdf(z)
    return sample_of(pit, level, level, pit=pit)


def tail_sums(z, level):
    return sums_of(z[z > stats.norm.ppf(level)], level, len(z))


@pytest.mark.parametrize("level", [0.9, 0.975, 0.99])
@pytest.mark.parametrize("draw", [
    lambda rng: rng.standard_normal(250), lambda rng: rng.standard_t(3, 400),
    lambda rng: 0.8 * rng.standard_normal(600), lambda rng: 2.0 + 0.3 * rng.standard_normal(100),
    lambda rng: np.r_[np.zeros(99), 2.5],
])  # fmt: skip
def test_censored_fit_equals_a_general_search(level, draw):
    z = draw(np.random.default_rng(6))
    if not np.any(z > stats.norm.ppf(level)):
        z[0] = 3.0
    sums = tail_sums(z, level)
    ratio, m, s = censored_ratio(z, level)
    assert likelihood_ratio(sums, level)[0] == pytest.approx(ratio, abs=1e-6)
    tail = implied_tail(sums, level)
    assert (tail.mean, tail.scale) == pytest.approx((m, s), abs=2e-4)


def test_censored_likelihood_equals_its_plain_form():
    z, level = np.random.default_rng(6).standard_normal(300), 0.9
    sums, c = tail_sums(z, level), stats.norm.ppf(level)
    for m, s in ((0.0, 1.0), (0.3, 1.2), (-1.0, 2.0)):
        plain = censored_log_likelihood(m, s, z, level) + 0.5 * sums.count[0] * np.log(2 * np.pi)
        assert log_likelihood((c - m) / s, 1 / s, sums)[0] == pytest.approx(plain, rel=1e-12)


def test_fit_of_many_paths_is_the_fit_of_each():
    rng = np.random.default_rng(8)
    samples = [stats.norm.ppf(0.975 + 0.025 * rng.random(n)) for n in (1, 2, 5, 30)]
    each = [sums_of(z, 0.975, 500) for z in samples]
    together = Sums(500, *(np.concatenate([getattr(s, name) for s in each]) for name in ("count", "first", "second")))
    for place, values in enumerate(zip(*fit(together), strict=True)):
        assert values == pytest.approx([value[0] for value in fit(each[place])], rel=1e-9)


def test_every_simulated_fit_is_at_its_maximum():
    from backtest.judging.pits import simulated_tails

    for level, days in ((0.99, 250), (0.975, 1000), (0.6, 10)):
        tails = simulated_tails(1, level, days, 2000)
        y = tails.scores - stats.norm.ppf(level)
        some = tails.counts > 0
        sums = Sums(days, tails.counts[some], tails.sums(y)[some], tails.sums(y * y)[some])
        t, q = fit(sums)
        mills = np.exp(stats.norm.logpdf(t) - stats.norm.logcdf(t))
        in_t = (days - sums.count) * mills - sums.count * t - q * sums.first
        in_q = sums.count / q - t * sums.first - q * sums.second
        inside = np.abs(t) < 39.9
        assert np.mean(inside) > 0.98 if days == 10 else inside.all()
        scale = sums.count + np.abs(sums.count * t)
        assert np.abs(in_t / scale)[inside].max() < 1e-7
        assert np.abs(in_q * q / sums.count)[inside].max() < 1e-7


def test_without_a_pit_above_the_level_the_ratio_is_its_limit():
    answer = JUDGE["berkowitz-tail"](of_scores(np.zeros(500), 0.99), SETTINGS)
    assert answer.statistic == pytest.approx(-2 * 500 * np.log(0.99))
    assert answer.p_value == p_upper(tail_ratio_null(7, 0.99, 500, 1999), answer.statistic)
    assert (answer.estimate, answer.evidence) == (None, "tail-heavy")
    assert "no PIT above the level: no size" in answer.notes


@pytest.mark.parametrize("level", [0.975, 0.99])
@pytest.mark.parametrize("days", [250, 500, 1000])
def test_chi_square_size_of_the_tail_ratio(level, days):
    # .04 to .06 at every length, at both levels (Monte Carlo error of 9,999 paths here, unknown there)
    null = tail_ratio_null(7, level, days, 9999)
    assert 0.035 < np.mean(null > stats.chi2.ppf(0.95, 2)) < 0.065


def test_simulated_law_keeps_its_size_on_fresh_uniforms_and_another_law_does_not():
    rng, null = np.random.default_rng(12), tail_ratio_null(7, 0.975, 250, 9999)

    def share(draw):
        z, c = draw((1000, 250)), stats.norm.ppf(0.975)
        sums = Sums(250, *(np.where(z > c, (z - c) ** power, 0.0).sum(axis=1) for power in (0, 1, 2)))
        return np.mean([p_upper(null, ratio) <= 0.05 for ratio in likelihood_ratio(sums, 0.975)])

    assert share(rng.standard_normal) == pytest.approx(0.05, abs=0.025)
    assert share(lambda shape: 1.25 * rng.standard_normal(shape)) > 0.3  # sigma understated by 20%


def test_a_thin_tail_is_rejected_and_named():
    # truth t5, forecast normal with the right standard deviation
    z = stats.t.rvs(5, size=2500, random_state=3) * np.sqrt(3 / 5)
    answer = JUDGE["berkowitz-tail"](of_scores(z), SETTINGS)
    assert answer.p_value < 0.001
    assert (answer.evidence, answer.direction) == ("tail-thin", "tail too thin")
    assert 1.0 < answer.low < answer.estimate < answer.high


def test_multiple_is_that_of_es_when_sigma_alone_is_wrong():
    # forecast N(0, 1), truth N(0, 1.25): the true ES is 1.25 times the forecast's, VaR too
    z = 1.25 * np.random.default_rng(5).standard_normal(400_000)
    tail = implied_tail(tail_sums(z, 0.975), 0.975)
    assert tail.multiple == pytest.approx(1.25, abs=0.01)
    true_es = z[z > np.quantile(z, 0.975)].mean()
    k = stats.norm.pdf(stats.norm.ppf(0.975)) / 0.025
    assert tail.multiple == pytest.approx(true_es / k, abs=0.01)


def test_ends_of_the_interval_lie_on_the_likelihood_contour():
    z, level = np.random.default_rng(6).standard_normal(500), 0.975
    sums = tail_sums(z, level)
    tail, k = implied_tail(sums, level), stats.norm.pdf(stats.norm.ppf(level)) / (1 - level)
    best = censored_log_likelihood(tail.mean, tail.scale, z, level)
    scales = np.exp(np.linspace(-3, 3, 60_001))
    for end in (tail.low, tail.high):
        c, kept = stats.norm.ppf(level), z[z > stats.norm.ppf(level)]
        means = k * (end - scales)
        squares = ((kept[:, None] - means) ** 2).sum(axis=0) / scales**2
        profile = -0.5 * squares - len(kept) * np.log(scales * np.sqrt(2 * np.pi))
        profile += (len(z) - len(kept)) * stats.norm.logcdf((c - means) / scales)
        assert profile.max() == pytest.approx(best - 0.5 * stats.chi2.ppf(0.95, 1), abs=1e-4)


def test_interval_covers_the_truth_near_its_rate():
    rng, inside = np.random.default_rng(14), []
    for _ in range(300):
        tail = implied_tail(tail_sums(rng.standard_normal(500), 0.975), 0.975)
        inside.append(tail.low <= 1.0 and (tail.high is None or tail.high >= 1.0))
    assert np.mean(inside) == pytest.approx(0.95, abs=0.05)


def test_ratio_of_all_days_equals_least_squares():
    z = np.random.default_rng(1).standard_normal(80) * 1.1 + 0.1
    assert berkowitz_ratio(z) == pytest.approx(regression_ratio(z), rel=1e-10)
    both = np.stack([z, 2 * z])
    assert berkowitz_ratio(both) == pytest.approx([regression_ratio(z), regression_ratio(2 * z)], rel=1e-10)


@pytest.mark.parametrize("days", [250, 500, 1000])
def test_chi_square_size_of_the_ratio_of_all_days(days):
    # .045 to .053; beyond 500 days the p shown relies on it
    null = berkowitz_null(3, days, 9999)
    assert np.mean(null > stats.chi2.ppf(0.95, 3)) == pytest.approx(0.05, abs=0.008)


def test_ratio_of_all_days_is_simulated_to_500_days_and_asymptotic_beyond():
    z = np.random.default_rng(1).standard_normal(501)
    short, long = (JUDGE["berkowitz"](of_scores(part), SETTINGS) for part in (z[:500], z))
    assert (short.law, long.law) == ("simulated", "asymptotic")
    assert long.p_value == pytest.approx(stats.chi2.sf(long.statistic, 3))
    assert short.p_value == pytest.approx(stats.chi2.sf(short.statistic, 3), abs=0.05)


@pytest.mark.parametrize(("change", "direction"), [
    (lambda z: 1.3 * z, "forecast too narrow"), (lambda z: 0.7 * z, "forecast too wide"),
    (lambda z: z[1:] + 0.5 * z[:-1], "forecast too narrow"),
])  # fmt: skip
def test_wrong_width_and_dependence_are_seen(change, direction):
    answer = JUDGE["berkowitz"](of_scores(change(np.random.default_rng(2).standard_normal(500))), SETTINGS)
    assert (answer.p_value, answer.evidence) == (1 / 2000, "shape")
    assert answer.direction == direction
    assert answer.low < answer.estimate < answer.high


def test_interval_of_the_scale_is_chi_square():
    z = np.random.default_rng(2).standard_normal(60)
    answer = JUDGE["berkowitz"](of_scores(z), SETTINGS)
    variance = z.var(ddof=1)
    assert answer.low == pytest.approx(np.sqrt(59 * variance / stats.chi2.ppf(0.975, 59)))
    assert answer.high == pytest.approx(np.sqrt(59 * variance / stats.chi2.ppf(0.025, 59)))


def test_too_few_or_constant_pits_are_not_tested():
    judge = JUDGE["berkowitz"]
    assert judge(of_scores(np.arange(4.0)), SETTINGS).missing == "needs 5 days with a PIT, has 4"
    assert judge(of_scores(np.full(30, 0.3)), SETTINGS).missing == "needs PITs that differ from one another"


def test_a_few_isolated_losses_far_out_have_no_size():
    answer = JUDGE["berkowitz-tail"](of_scores(np.r_[np.full(999, 0.0), 5.2]), SETTINGS)
    assert answer.estimate is None
    assert "too few PITs above the level for a size: the fitted tail implies no positive ES" in answer.notes


@pytest.mark.parametrize("pit", [1.0, 0.995, 0.990000001])
@pytest.mark.parametrize("days", [1, 2, 250])
def test_every_day_above_the_level_still_gives_finite_numbers(pit, days):
    answer = JUDGE["berkowitz-tail"](sample_of(np.full(days, 2.0), pit=pit), SETTINGS)
    numbers = [answer.statistic, answer.p_value, answer.estimate, answer.low, answer.high]
    assert all(n is None or np.isfinite(n) for n in numbers)
    assert answer.statistic > 5.0
    assert answer.low <= answer.estimate
