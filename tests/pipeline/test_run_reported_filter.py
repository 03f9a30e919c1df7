"""A run with a model that scales the reported VaR: forecasts, fits, remarks; whose VaR; what is refused."""

import numpy as np
import pandas as pd
import pytest

import backtest
from backtest.recording.run_folder import read_record
from tests.reference.datasets import garch_t, pnl_series
from tests.reference.invented_studies import tailmark, write_study
from tests.reference.invented_vectors import long_vectors

DAYS, WINDOW = 400, 250
MODEL = {"name": "compensating", "filter": "reported", "tail": "gpd", "tail_share": 0.2}
STUDY = """
[review]
{review}
[data]
pnl = "pnl.csv"
reported = "reported.csv"
{data}
[forecast]
window = 250
models = ["historical"]
fallback_share = 1
{forecast}
[[forecast.model]]
name = "compensating"
filter = "reported"
tail = "gpd"
tail_share = 0.2
[judge]
tests = ["binomial", "mcneil-frey"]
simulations = 99
"""


def study_text(review='subject = "HS"', data="", forecast="") -> str:
    return STUDY.format(review=review, data=data, forecast=forecast)


@pytest.fixture(scope="module")
def files() -> dict[str, pd.DataFrame]:
    """Two desks, of Wool nothing is reported; the subject, one of two models, has two days with a VaR of zero."""
    pnl = pnl_series((1000 * garch_t(DAYS, 3)[0]).round(2))
    var = (1000 * np.random.default_rng(1).uniform(1, 3, DAYS)).round(2)
    var[[10, 300]] = 0.0
    table = pnl.rename("hypothetical").rename_axis("date").reset_index()
    report = pd.DataFrame({"date": pnl.index, "desk": "Lumber", "level": 0.99, "var": var})
    return {
        "pnl.csv": pd.concat([table.assign(desk=d) for d in ("Lumber", "Wool")]),
        "reported.csv": pd.concat([report.assign(model="HS"), report.assign(model="stressed", var=9 * var)]),
    }


@pytest.fixture(scope="module")
def ran(files, tmp_path_factory):
    study = write_study(tmp_path_factory.mktemp("scaled"), files, study_text())
    said = tailmark("run", study)
    assert said.code == 0, said.err
    return study, read_record(study.parent / "study-run")


def test_the_run_scales_the_subject_as_the_verb_scales_one_model(ran, files):
    made = ran[1].forecasts.query("model == 'compensating'").reset_index(drop=True)
    of_subject = files["reported.csv"].query("model == 'HS'")
    alone = backtest.forecast(files["pnl.csv"], models=[MODEL], window=WINDOW, reported=of_subject)
    assert len(alone) == (DAYS - WINDOW - 2) * 2
    pd.testing.assert_frame_equal(made, alone, check_exact=True)


def test_days_left_out_stand_in_the_remarks_of_run_and_check(ran):
    study, record = ran
    remarks = record.remarks.query("rule == 'unscaled-days'")
    assert list(zip(remarks["desk"], remarks["count"], strict=True)) == [("Lumber", 2), ("Wool", 150)]
    said = tailmark("check", study)
    assert said.code == 0
    for text in remarks["text"]:
        assert text in said.out


def test_the_fits_say_the_level_of_the_scale(ran):
    fits = ran[1].fits
    assert set(fits["filter"]) == {"reported at 0.99"}
    assert len(fits) == DAYS - WINDOW - 2


def test_the_model_is_judged_for_severity_on_its_own_scale(ran):
    rows = ran[1].results.query("model == 'compensating' and desk == 'Lumber' and test == 'mcneil-frey'")
    assert len(rows)
    assert not rows["phrase"].str.contains("sigma").any()


@pytest.mark.parametrize(
    ("parts", "says"),
    [
        ({"review": ""}, "'compensating': filter 'reported' needs the VaR of one reported model, found 'HS, stressed'"),
        (
            {"review": 'subject = "HS"\n[[review.method]]\nfrom = 2010-01-01\nfilter = "reported"\nwindow = 250'},
            "cannot be performed again from its own VaR",
        ),
    ],
)
def test_what_has_no_scale_is_refused_by_run_and_check(files, tmp_path, parts, says):
    study = write_study(tmp_path, files, study_text(**parts))
    for command in ("check", "run"):
        said = tailmark(command, study)
        assert said.code == 2
        assert says in " ".join(said.err.split())


def test_without_a_reported_file_the_model_is_refused(files, tmp_path):
    text = study_text(review="").replace('reported = "reported.csv"\n', "")
    said = tailmark("check", write_study(tmp_path, {"pnl.csv": files["pnl.csv"]}, text))
    assert said.code == 2
    assert "Supply data.reported" in " ".join(said.err.split())


def test_beside_models_on_vectors_the_ratios_are_still_of_pnl(files):
    pnl = files["pnl.csv"].query("desk == 'Lumber'")
    of_subject = files["reported.csv"].query("model == 'HS'")
    series = pd.Series(pnl["hypothetical"].to_numpy(), index=pd.DatetimeIndex(pnl["date"]))
    vectors = long_vectors(series, range(390, DAYS), WINDOW, desk="Lumber")
    options = {"window": WINDOW, "reported": of_subject}
    both = backtest.forecast(pnl, [MODEL, "historical"], vectors=vectors, learn_from="vectors", **options)
    plain = backtest.forecast(pnl, [MODEL], **options)
    ours = both[both["model"] == "compensating"].reset_index(drop=True)
    pd.testing.assert_frame_equal(ours, plain, check_exact=True)
    assert (both["model"] == "historical").sum() == 20
