import pytest

from backtest.errors import StudyError
from backtest.forecasting.models import NAMED, resolve, resolve_all

LEVELS = (0.975, 0.99)


@pytest.mark.parametrize("name", NAMED)
def test_every_named_model_resolves_and_says_in_one_line_what_it_is(name):
    model = resolve(name, levels=LEVELS)
    assert (model.filter.kind, model.tail.kind) == (NAMED[name]["filter"], NAMED[name]["tail"])
    assert "\n" not in model.line
    assert "1000" in model.line
    assert model.source


def test_the_garch_default_is_an_ar1_mean_and_the_sample_variance():
    model = resolve("conditional-evt", levels=LEVELS)
    assert (model.filter.mean, model.filter.start, model.tail.share) == ("ar1", "sample-variance", 0.10)


@pytest.mark.parametrize(
    ("model", "said"),
    [
        ("historcal", "Did you mean 'historical'?"),
        ({"name": "m", "filter": "garh"}, "Did you mean 'garch'?"),
        ({"name": "m", "tail": "gdp"}, "Did you mean 'gpd'?"),
        ({"name": "m", "filter": "garch", "mean": "ar2"}, "Did you mean 'ar1'?"),
        ({"name": "m", "filter": "garch", "innovations": "gaussian"}, "Known: normal, skew-t, t"),
        ({"name": "m", "filter": "none", "decay": 0.9}, "decay does not belong to none"),
        ({"name": "m", "filter": "ewma", "mean": "ar1"}, "mean does not belong to ewma"),
        ({"name": "m", "tail": "empirical", "tail_share": 0.1}, "tail_share does not belong to empirical"),
        ({"name": "m", "tail": "t", "age_decay": 0.9}, "age_decay does not belong to t"),
        ({"name": "m", "tail": "gpd", "gpd_fit": "pmw"}, "Did you mean 'pwm'?"),
        ({"name": "m", "filter": "library:egrach"}, "Did you mean 'library:EGARCH'?"),
        ({"name": "m", "filter": "libary:GARCH"}, "Did you mean 'library:GARCH'?"),
        ({"name": "m", "filter": "stochastic volatility"}, "Known: .*library:APARCH, library:ARCH.*reported"),
        ({"name": "m", "filter": "library:GARCH", "start": "ewma-75"}, "start does not belong to library"),
        ({"name": "m", "filter": "library:GARCH", "innovations": "ged"}, "Known: normal, skew-t, t"),
        ({"name": "m", "filter": "reported", "mean": "ar1"}, "mean does not belong to reported"),
        ({"name": "m", "windw": 500}, "Did you mean 'window'?"),
        ({"name": "m", "tail": "gpd", "window": 100}, "at least 20 excesses"),
        ({"name": "m", "filter": "ewma", "decay": 1.0}, "decay: .* between 0 and 1"),
        ({"name": "m", "filter": "ewma", "decay": "0.9"}, "decay: .* found '0.9'"),
        ({"name": "m", "filter": "ewma", "decay": float("nan")}, "decay: .* found nan"),
        ({"name": "m", "tail": "age-weighted", "age_decay": 0}, "age_decay: .* found 0"),
        ({"name": "m", "tail": "gpd", "tail_share": 0.5}, "tail_share: .* between 0 and 0.5"),
        ({"name": "m", "tail": "gpd", "tail_share": True}, "tail_share: .* found True"),
        ({"name": "m", "window": 49}, "window: .* at least 50"),
        ({"name": "m", "window": 250.0}, "window: .* found 250.0"),
        ({"name": "m", "recalibrate_days": 0}, "recalibrate_days: .* at least 1"),
        ({"name": 5}, "name is not text"),
        (5, "not a model"),
        ({"name": "m", "tail": "gpd", "tail_share": 0.02}, "the tail starts beyond a level"),
    ],
)
def test_what_does_not_exist_or_fit_is_refused_with_a_remedy(model, said):
    with pytest.raises(StudyError, match=said.replace("?", r"\?")):
        resolve(model, levels=LEVELS)


@pytest.mark.parametrize("options", [{"filter": "ewma"}, {"tail": "normal"}, {"tail": "gpd"}])
def test_the_name_of_a_named_model_stands_for_that_pair_alone(options):
    with pytest.raises(StudyError, match=r"bears the name .*'historical'.* Give the pair a name of its own"):
        resolve({"name": "historical", **options}, levels=LEVELS)
    assert resolve({"name": "historical", "window": 500}, levels=LEVELS).window == 500


def test_a_list_of_models_is_a_list():
    for models in ("historical", {"name": "m"}, 5):
        with pytest.raises(StudyError, match=r"forecast\.models: not a list"):
            resolve_all(models, levels=LEVELS)


def test_two_models_of_one_name_are_refused():
    with pytest.raises(StudyError, match="two models of the same name"):
        resolve_all(["historical", {"name": "historical"}], levels=LEVELS)


def test_a_model_may_not_take_the_name_of_the_subject():
    with pytest.raises(StudyError, match="two models of the same name"):
        resolve_all(["historical"], taken=["historical"], levels=LEVELS)


def test_residuals_are_one_fewer_where_the_first_day_only_conditions():
    for options in ({"filter": "garch", "start": "ewma-75"}, {"filter": "library:EGARCH"}):
        assert resolve({"name": "m", **options}, levels=LEVELS).residuals == 999
    assert resolve({"name": "m", "filter": "library:EGARCH", "mean": "constant"}, levels=LEVELS).residuals == 1000
    assert resolve("filtered-historical", levels=LEVELS).residuals == 1000
