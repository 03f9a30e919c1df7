"""McNeil-Frey and Acerbi-Szekely 2: statistics, simulated laws, sizes and edges."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.answers import Settings
from backtest.judging.severity import TESTS, bootstrap_p, residual_null, residual_statistic, z2, z2_null
from tests.reference.judging_laws import es_t, gpd_losses, z2_of_iid
from tests.reference.judging_tables import sample_of

MCNEIL_FREY, ACERBI_SZEKELY = TESTS
SETTINGS = Settings(0.05, 999, 1)


def test_residual_statistic_is_the_one_sample_t():
    residuals = np.array([0.3, -0.2, 1.1, 0.4, 0.05])
    assert residual_statistic(residuals) == pytest.approx(stats.ttest_1samp(residuals, 0.0).statistic)


def test_z2_by_hand():
    losses, var, es = np.array([0.5, 3.0, 2.0, 4.0]), np.full(4, 2.0), np.array([2.5, 2.5, 2.5, 4.0])
    assert z2(losses, var, es, 0.75) == pytest.approx(1 - (3.0 / 2.5 + 4.0 / 4.0) / (4 * 0.25))  # loss = VaR is none
    assert z2(losses - 9.0, var, es, 0.75) == 1.0


@pytest.mark.parametrize(
    ("nu", "points"),
    [(5, {0.10: -0.551, 0.05: -0.736, 0.01: -1.109}), (np.inf, {0.10: -0.529, 0.05: -0.700, 0.01: -1.037})],
    ids=["t5", "normal"],
)
def test_critical_points_at_250_days_and_97_5_percent(nu, points):
    # Acerbi and Szekely (2014): 5% about -0.70, stable over t laws; to three digits computed with 4e6 paths
    rng, paths, normal = np.random.default_rng(2), 40_000, nu == np.inf
    var = float(stats.norm.ppf(0.975) if normal else stats.t.ppf(0.975, nu))
    es = float(stats.norm.pdf(var) / 0.025) if normal else es_t(nu, 0.975)
    losses = rng.standard_normal((paths, 250)) if normal else rng.standard_t(nu, (paths, 250))
    found = np.sort(z2_of_iid(losses, var, es, 0.975))
    for chance, point in points.items():
        share = np.searchsorted(found, point, side="right") / paths
        assert share == pytest.approx(chance, abs=4 * np.sqrt(chance * (1 - chance) / paths))


@pytest.mark.parametrize(("level", "days", "point"), [(0.975, 250, -0.736), (0.975, 1000, -0.355), (0.99, 250, -1.20)])
def test_gpd_null_is_close_to_the_full_law_of_t5(level, days, point):
    # the null knows VaR, ES and the shape 1/5 of t5 only; at the 5% point it differs from the full law by little
    sample = sample_of(np.zeros(days), stats.t.ppf(level, 5), level, es=es_t(5, level), shape=0.2)
    null = z2_null(sample, 0.2, Settings(0.05, 20_000, 3))
    assert np.mean(null <= point) == pytest.approx(0.05, abs=0.006)


@pytest.mark.parametrize("xi", [0.0, 0.3])
def test_z2_null_against_plain_simulation(xi):
    losses = gpd_losses(np.random.default_rng(4), (20_000, 100), var=2.0, es=3.0, xi=xi, level=0.975)
    plain = z2_of_iid(losses, 2.0, 3.0, 0.975)
    ours = z2_null(sample_of(np.zeros(100), 2.0, 0.975, es=3.0), xi, Settings(0.05, 20_000, 9))
    assert stats.ks_2samp(plain, ours).pvalue > 0.001
    assert ours.mean() == pytest.approx(0.0, abs=4 * ours.std() / np.sqrt(20_000))


def test_z2_null_uses_the_path_of_forecasts_and_shapes():
    es = np.where(np.arange(60) < 30, 2.2, 6.0)
    sample = sample_of(np.zeros(60), 2.0, 0.9, es=es)
    shapes = np.where(np.arange(60) < 30, 0.0, 0.4)
    ours = z2_null(sample, shapes, Settings(0.05, 20_000, 9))
    rng = np.random.default_rng(1)
    parts = [gpd_losses(rng, (20_000, 30), var=2.0, es=e, xi=x, level=0.9) / e for e, x in ((2.2, 0.0), (6.0, 0.4))]
    plain = 1 - np.concatenate(parts, axis=1).sum(axis=1) / (60 * 0.1)
    assert stats.ks_2samp(plain, ours).pvalue > 0.001


def test_residual_null_against_plain_simulation():
    rng, n = np.random.default_rng(6), 8
    scales, shapes = np.linspace(0.5, 2.0, n), np.linspace(0.0, 0.4, n)
    excess = stats.genpareto.rvs(shapes, scale=1 - shapes, size=(20_000, n), random_state=rng)
    plain = stats.ttest_1samp(scales * (excess - 1), 0.0, axis=1).statistic
    ours = residual_null(scales, shapes, 0.99, 250, Settings(0.05, 20_000, 2))
    assert stats.ks_2samp(plain, ours).pvalue > 0.001


def test_residual_null_does_not_depend_on_blocks():
    scales, one, many = np.ones(150), Settings(0.05, 500, 2), np.full(150, 0.1)
    varying = many.copy()
    varying[0] = 0.1 + 1e-12  # not one shape for all: the other way through
    np.testing.assert_allclose(
        residual_null(scales, many, 0.99, 250, one), residual_null(scales, varying, 0.99, 250, one), rtol=1e-9
    )


def test_bootstrap_p_against_a_plain_loop():
    residuals, rng = np.array([0.9, -0.3, 0.2, 1.4, 0.1, -0.2, 0.5]), np.random.default_rng(5)
    centred, observed = residuals - residuals.mean(), residual_statistic(residuals)
    larger = 0
    for _ in range(20_000):
        drawn = rng.choice(centred, size=7)
        spread = drawn.std(ddof=1)
        larger += (drawn.mean() / (spread / np.sqrt(7)) >= observed) if spread > 1e-12 else drawn.mean() > 0
    p_value = bootstrap_p(residuals, 20_000, np.random.default_rng(1))
    assert p_value == pytest.approx(larger / 20_000, abs=0.008)


def judged(test, losses, **measures):
    return test.judge(sample_of(losses, 2.0, 0.975, es=3.0, sigma=1.0, **measures), SETTINGS)


def test_size_oracle_and_negative_control():
    rng, trials = np.random.default_rng(12), 400
    right = gpd_losses(rng, (trials, 500), var=2.0, es=3.0, xi=0.1, level=0.975)
    wrong = gpd_losses(rng, (100, 500), var=2.0, es=4.2, xi=0.1, level=0.975)  # ES understated by 29%
    error = 3 * np.sqrt(0.05 * 0.95 / trials)
    for test in TESTS:
        answers = [judged(test, losses) for losses in right]
        p_values = np.array([a.p_value for a in answers if a.p_value is not None])
        assert len(p_values) > 0.98 * trials
        assert np.mean(p_values <= 0.05) <= 0.05 + error
    found = np.array([judged(MCNEIL_FREY, losses).p_value or 1.0 for losses in wrong])
    assert np.mean(found <= 0.05) > 0.6
    often = gpd_losses(rng, (100, 500), var=2.0, es=3.0, xi=0.1, level=0.94)  # exceptions 2.4 times too often
    found = np.array([judged(ACERBI_SZEKELY, losses).p_value for losses in often])
    assert np.mean(found <= 0.05) > 0.8


def test_zero_exceptions_can_be_evidence_of_too_high():
    quiet = sample_of(np.zeros(500), 2.0, 0.99, es=3.0, sigma=1.0)
    answer = ACERBI_SZEKELY.judge(quiet, Settings(0.05, 9999, 1))
    assert answer.statistic == 1.0
    assert answer.p_value == pytest.approx(2 * 0.99**500, abs=0.006)
    assert answer.evidence == "risk-high"
    other = MCNEIL_FREY.judge(quiet, SETTINGS)
    assert (other.p_value, other.missing) == (None, "0 exceptions, needs 5")


def test_fewer_than_five_exceptions_keep_their_statistic():
    losses = np.zeros(250)
    losses[[10, 50, 90]] = [2.5, 3.5, 4.0]
    answer = judged(MCNEIL_FREY, losses)
    assert answer.missing == "3 exceptions, needs 5"
    assert answer.statistic == pytest.approx(stats.ttest_1samp([-0.5, 0.5, 1.0], 0.0).statistic)


@pytest.mark.parametrize("test", TESTS, ids=lambda t: t.key)
def test_what_is_missing_is_named(test):
    losses = np.where(np.arange(250) % 20 == 0, 3.5, 0.0)
    assert test.judge(sample_of(losses, 2.0), SETTINGS).missing == "needs es"
    if test is MCNEIL_FREY:
        assert test.judge(sample_of(losses, 2.0, es=3.0), SETTINGS).missing == "needs sigma"


def test_equal_residuals_have_no_statistic():
    losses = np.where(np.arange(250) % 25 == 0, 3.5, 0.0)
    assert judged(MCNEIL_FREY, losses).missing == "needs residuals that differ from one another"


@pytest.mark.parametrize("test", TESTS, ids=lambda t: t.key)
def test_single_days_with_unusable_es_are_left_out_and_counted(test):
    rng = np.random.default_rng(1)
    losses = gpd_losses(rng, (500,), var=2.0, es=3.0, xi=0.1, level=0.95)
    es = np.full(500, 3.0)
    es[:3] = 1.0  # below VaR
    es[3:5] = np.nan
    answer = test.judge(sample_of(losses, 2.0, 0.95, es=es, sigma=1.0), SETTINGS)
    assert answer.used is not None
    assert answer.used.days == 495
    assert sum("left out" in note for note in answer.notes) == 2
    es[:40] = 1.0
    refused = test.judge(sample_of(losses, 2.0, 0.95, es=es, sigma=1.0), SETTINGS)
    assert refused.p_value is None
    assert "40 of 500 days" in refused.missing


@pytest.mark.parametrize("test", TESTS, ids=lambda t: t.key)
def test_an_assumed_shape_is_said_with_two_others(test):
    losses = gpd_losses(np.random.default_rng(1), (500,), var=2.0, es=3.0, xi=0.1, level=0.975)
    notes = " ".join(judged(test, losses).notes)
    assert "GPD shape 0.1 assumed" in notes
    assert "at shape 0," in notes
    assert "at shape 0.3" in notes
    assert "own GPD shape" in " ".join(judged(test, losses, shape=0.1).notes)
    assert judged(test, losses).p_value == judged(test, losses, shape=0.1).p_value
