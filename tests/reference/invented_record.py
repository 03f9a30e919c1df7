"""An invented record, made from a seed: three desks of an institution that does not exist, 600 days.

Losses, forecasts, counts, exact p-values, the log and the bridge's counts follow from each other as in a real run;
the other statistics are stand-ins of the right shape. ``invented_record`` has switches for what may be absent.
"""

from dataclasses import replace
from functools import cache

import numpy as np
import pandas as pd
from scipy import stats

from backtest.judging.criteria import Criteria, criteria_table
from backtest.judging.four_cells import four_cells
from backtest.judging.scoreboard import scoreboard
from backtest.records import (
    BRIDGE_COLUMNS,
    ESTIMATION_RISK_COLUMNS,
    FIT_COLUMNS,
    FORECAST_COLUMNS,
    REMARK_COLUMNS,
    REPORTED_STATUS,
    Record,
    Result,
    results_table,
)

FIRM, SUBJECT = "Firm", "HS-250"
DESKS = {FIRM: 600, "NA": 600, "New desk": 131}
MODELS = {"historical": 0.95, "conditional-evt": 1.15}
LEVELS = (0.975, 0.99)
KINDS = ("hypothetical", "actual")
SPANS = (250, "all")
NAMED = ("pnl", "forecasts", "results", "criteria", "exceptions", "bridge", "four_cells", "scoreboard", "remarks")
"""Tables of a record in which desks and models stand by name."""
HOUSE = Criteria(1.2, 1.2, "green", "no evidence", 250)
DATES = pd.bdate_range("2023-09-11", periods=600).to_numpy().astype("datetime64[us]")


@cache  # tests share it: nobody changes a table in place
def invented_record(*, subject: bool = True, firm: bool = True, exceptions: bool = True, bridge: bool = True) -> Record:
    """Return the record; without a subject, a firm, any exception, or a bridge where a switch says so."""
    rng = np.random.default_rng(20260101)
    pnl = pd.concat([_pnl(rng, desk, days) for desk, days in DESKS.items()], ignore_index=True)
    forecasts = _forecasts(pnl, 1.0 if exceptions else 9.0)
    if not subject:
        forecasts = forecasts[forecasts["status"] != REPORTED_STATUS].reset_index(drop=True)
    losses = forecasts.merge(pnl, on=["date", "desk"], how="left")
    results = [r for _, own in losses.groupby(["desk", "model", "level"], sort=False) for r in _results(own)]
    if subject and firm:
        results.append(_rule(losses))
    steps = ([SUBJECT] if subject else []) + list(MODELS)
    return Record(
        manifest=_manifest(forecasts, subject, firm),
        pnl=pnl,
        forecasts=forecasts,
        fits=pd.DataFrame(columns=list(FIT_COLUMNS)).astype({"desk": "str", "status": "str"}),
        results=results_table(results),
        criteria=criteria_table(results, HOUSE, subject=SUBJECT if subject else None),
        exceptions=_log(losses),
        bridge=_bridge(losses, steps) if bridge else pd.DataFrame(columns=list(BRIDGE_COLUMNS)),
        four_cells=four_cells(pnl, forecasts, levels=LEVELS),
        scoreboard=scoreboard(pnl, forecasts),
        estimation_risk=pd.DataFrame(columns=list(ESTIMATION_RISK_COLUMNS)),
        paths=pd.DataFrame(columns=["desk", "model", "figure", "series", "x", "y", "low", "high"]),
        remarks=_remarks(),
    )


def renamed(record: Record, names: dict[str, str]) -> Record:
    """Return the record with desks, models and texts renamed wherever they stand."""
    tables = {
        t: getattr(record, t).replace(names)
        for t in (
            "pnl",
            "forecasts",
            "results",
            "criteria",
            "exceptions",
            "bridge",
            "four_cells",
            "scoreboard",
            "remarks",
        )
    }
    return replace(record, manifest=_renamed(record.manifest, names), **tables)


def _renamed(value: object, names: dict[str, str]) -> object:
    if isinstance(value, dict):
        return {names.get(k, k): _renamed(v, names) for k, v in value.items()}
    if isinstance(value, list):
        return [_renamed(v, names) for v in value]
    return names.get(value, value) if isinstance(value, str) else value


def _pnl(rng: np.random.Generator, desk: str, days: int) -> pd.DataFrame:
    sigma = 1.3e6 * np.exp(0.5 * np.sin(np.arange(days) / 55))
    hypothetical = sigma * rng.standard_t(4, days) / np.sqrt(2)
    actual = hypothetical + 1e5 * rng.standard_normal(days)
    dates = DATES[-days:]
    hypothetical[days // 2] = np.nan
    return pd.DataFrame({"date": dates, "desk": desk, "hypothetical": hypothetical, "actual": actual})


def _forecasts(pnl: pd.DataFrame, factor: float) -> pd.DataFrame:
    rows = []
    for desk, own in pnl.groupby("desk", sort=False):
        models = {SUBJECT: 0.8} | (MODELS if len(own) > 250 else {})
        rows += [_forecast(own, str(desk), m, size * factor, level) for m, size in models.items() for level in LEVELS]
    return pd.concat(rows, ignore_index=True)[list(FORECAST_COLUMNS)]


def _forecast(own: pd.DataFrame, desk: str, model: str, size: float, level: float) -> pd.DataFrame:
    own = own if len(own) < 250 else own.iloc[100:]
    wave = np.exp(0.4 * np.sin(np.arange(len(own)) / 55)) if model == "conditional-evt" else 1.0
    var = size * 1.3e6 * stats.norm.ppf(level) * wave * np.ones(len(own))
    status = np.full(len(own), REPORTED_STATUS if model == SUBJECT else "ok", dtype=object)
    if model == "conditional-evt":
        status[5:8] = "fallback: last good parameters"
    origin = own["date"].to_numpy() - np.timedelta64(1, "D")
    columns = dict.fromkeys(
        (
            "var_low",
            "var_high",
            "es_low",
            "es_high",
            "mean",
            "sigma",
            "shape",
            "scale",
            "threshold",
            "pit_hypothetical",
            "pit_actual",
        ),
        np.nan,
    )
    made = {"origin": origin, "desk": desk, "model": model, "level": level, "horizon": 1, "var": var, "es": 1.25 * var}
    return pd.DataFrame({"date": own["date"].to_numpy(), **made, **columns, "status": status})


def _results(own: pd.DataFrame) -> list[Result]:
    found = []
    for kind in KINDS:
        for span in SPANS:
            part = own if span == "all" else own[own["date"] >= DATES[-250]]
            found += _of_span(part[part[kind].notna()], kind)
    return found


def _of_span(part: pd.DataFrame, kind: str) -> list[Result]:
    desk, model, level = part[["desk", "model", "level"]].iloc[0]
    losses, n = -part[kind], len(part)
    k = int((losses > part["var"]).sum())
    p = min(1.0, 2 * min(stats.binom.cdf(k, n, 1 - level), stats.binom.sf(k - 1, n, 1 - level)))
    low, high = stats.binomtest(k, n).proportion_ci(method="exact")
    multiple = float(np.sort(losses / part["var"])[int(np.ceil(n * level)) - 1])
    side = "evidence that VaR is too low" if k > n * (1 - level) else "evidence that VaR is too high"
    words = side if p <= 0.05 else "no evidence"
    first, last = (str(part["date"].iloc[i].date()) for i in (0, -1))
    blank = Result(
        desk, model, "", kind, level, first, last, n, k, "how often", "binomial", float(k), p, "exact", k / n, low,
        high, "", 0.4, "rejected" if p <= 0.05 else "not rejected", "", words, "one-sided p in the record", "exact law",
    )  # fmt: skip
    return [blank, *_others(blank, multiple)]


def _others(blank: Result, multiple: float) -> list[Result]:
    k, level = blank.exceptions or 0, blank.level
    none = {"statistic": None, "p_value": None, "law": None, "could_see": None, "note": "", "decision": "not tested"}
    untested = none | {"estimate": None, "low": None, "high": None}
    independence = replace(
        blank, question="when", test="christoffersen-independence", statistic=1.9, p_value=0.0496, decision="rejected",
        estimate=11.5, low=-2.0, high=24.0, phrase="evidence that exceptions are too clustered", note="",
    )  # fmt: skip
    if k == 0:
        independence = replace(independence, **untested | {"phrase": "not tested: 0 exceptions, needs 1"})
    deep = replace(
        blank, question="how deep", test="mcneil-frey", **untested, phrase=f"not tested: {k} exceptions, needs 5"
    )
    if k >= 5:
        deep = replace(deep, statistic=1.2, p_value=0.0004, law="simulated", estimate=1.31, low=1.05, high=1.6)
        deep = replace(deep, decision="rejected", phrase="evidence that ES is too low", note="GPD shape 0.1 assumed")
    high = None if level == 0.99 and blank.days < 368 else multiple * 1.6
    size = replace(blank, question="by how much", test="sufficient-var-multiple", **none)
    size = replace(size, estimate=multiple, low=multiple * 0.7, high=high, phrase="", source="order statistics")
    es = replace(size, test="sufficient-es-multiple", estimate=multiple * 1.1, high=multiple * 1.5, source="bootstrap")
    better = replace(blank, question="which is better", test="diebold-mariano", against=SUBJECT, statistic=-1.4)
    better = replace(
        better, p_value=0.16, law="asymptotic", estimate=-0.05, low=-0.12, high=0.02, decision="not rejected"
    )
    better = replace(better, phrase="no evidence", note="")
    return [independence, deep, size, es] + ([] if blank.model == SUBJECT else [better])


def _rule(losses: pd.DataFrame) -> Result:
    own = losses[(losses["desk"] == FIRM) & (losses["model"] == SUBJECT) & (losses["level"] == 0.99)]
    own = own[own["date"] >= DATES[-250]]
    count = max(int((-own[k] > own["var"]).sum() + own[k].isna().sum()) for k in KINDS)
    zone = "green" if count < 5 else "amber" if count < 10 else "red"
    multipliers = (1.5, 1.5, 1.5, 1.5, 1.5, 1.7, 1.76, 1.83, 1.88, 1.92, 2.0)
    return Result(
        FIRM, SUBJECT, "", "larger of hypothetical and actual", 0.99, str(own["date"].iloc[0].date()),
        str(own["date"].iloc[-1].date()), len(own), count, "by rule", "basel-zone", float(count), None, None,
        multipliers[min(count, 10)], None, None, "multiplier, MAR32.9, table 1", None, zone, "",
        f"{zone} zone: {count} exceptions", "counts by kind in the record", "MAR32.5(1); MAR32.9, table 1",
    )  # fmt: skip


def _log(losses: pd.DataFrame) -> pd.DataFrame:
    own = losses[losses["model"] == SUBJECT]
    if own.empty:
        return pd.DataFrame(columns=["date", "desk", "model"])
    wide = own[own["level"] == LEVELS[0]][["date", "desk", "model", *KINDS]].reset_index(drop=True)
    for level in LEVELS:
        var = own[own["level"] == level]["var"].to_numpy()
        wide[f"var_{level:g}"], wide[f"es_{level:g}"] = var, 1.25 * var
        for kind in KINDS:
            loss = -wide[kind].to_numpy()
            hit = loss > var
            wide[f"exception_{kind}_{level:g}"] = hit
            wide[f"excess_{kind}_{level:g}"] = np.where(hit, loss - var, np.nan)
            wide[f"ratio_{kind}_{level:g}"] = np.where(hit, loss / var, np.nan)
    wide["explanation"] = ""
    flags = [c for c in wide if c.startswith("exception_")]
    return wide[wide[flags].any(axis=1)].sort_values(["date", "desk"]).reset_index(drop=True)


def _bridge(losses: pd.DataFrame, models: list[str]) -> pd.DataFrame:
    names = ["reported", "longer window", "plus tail"][-len(models) :]
    rows: list[dict[str, object]] = [{"desk": "New desk", "note": "not tested: history"}]
    for desk in (FIRM, "NA"):
        for level in LEVELS:
            own = losses[(losses["desk"] == desk) & (losses["level"] == level) & losses["hypothetical"].notna()]
            for place, (step, model) in enumerate(zip(names, models, strict=True)):
                rows.append(_step(own[own["model"] == model], desk, level, step, place))
    return pd.DataFrame(rows, columns=list(BRIDGE_COLUMNS))


def _step(part: pd.DataFrame, desk: str, level: float, step: str, place: int) -> dict[str, object]:
    change = {"score_change": (None, -0.08, -0.01)[place], "low": (None, -0.13, -0.06)[place]}
    return {
        "desk": desk, "level": level, "pnl_kind": "hypothetical", "step": step, "model": part["model"].iloc[0],
        "window": 250 if place == 0 else 1000, "from": str(part["date"].iloc[0].date()),
        "to": str(part["date"].iloc[-1].date()), "days": len(part),
        "exceptions": int((-part["hypothetical"] > part["var"]).sum()), "average_var": float(part["var"].mean()),
        "average_change": 2000.0 * (1 + 5 * place), "score_name": "FZ0", "score": 15.2, **change,
        "high": (None, -0.03, 0.04)[place], "note": "",
    }  # fmt: skip


def _remarks() -> pd.DataFrame:
    rows = [
        ("business day without a row", "pnl.csv", "NA", "2024-05-01", "2024-05-01", 1, "one business day has no P&L"),
        ("unchanged stretch", "pnl.csv", "New desk", "2025-07-01", "2025-07-11", 9, "the same P&L on 9 days"),
        ("column nobody names", "reported.csv", "", "", "", 1, "column 'book' is not used"),
    ]
    return pd.DataFrame(rows, columns=list(REMARK_COLUMNS))


def _manifest(forecasts: pd.DataFrame, subject: bool, firm: bool) -> dict[str, object]:
    own = forecasts[forecasts["status"] != REPORTED_STATUS].drop_duplicates(["date", "desk", "model"])
    review = {"subject": SUBJECT if subject else None, "firm": FIRM if firm else None, "days": list(SPANS)}
    lines = {"historical": ("none", "empirical"), "conditional-evt": ("garch", "gpd")}
    return {
        "format": 2,
        "program": "tailmark",
        "version": "0.1.0",
        "versions": {"python": "3.11.9", "numpy": "2.4.0"},
        "platform": "Linux x86_64",
        "run": "0a1b2c3d4e5f",
        "seeds": {"study": 20260101},
        "started": "2026-01-05T08:00:00Z",
        "finished": "2026-01-05T08:00:21Z",
        "as_of": str(DATES[-1])[:10],
        "study": {
            "title": "Invented review",
            "review": review | {"rules": "basel-mar32" if subject and firm else None},
            "data": {"currency": "EUR", "pnl": "pnl.csv"},
            "judge": {"significance": 0.05},
        },
        "inputs": [{"role": "pnl", "name": "pnl.csv", "sha256": "ab" * 32, "rows": 1331}],
        "models": [
            {"name": n, "filter": f, "tail": t, "window": 1000, "line": f"{f} x {t}", "source": "invented (2000)"}
            for n, (f, t) in lines.items()
        ],
        "power": {"level": 0.99, "nominal_rate": 0.01, "true_rate": 0.02, "days": 250, "power": 0.3779},
        "fallbacks": {"forecasts": len(own), "fallbacks": 6, "by_status": {"fallback: last good parameters": 6}},
        "desks": {d: {"first": str(DATES[-n])[:10], "last": str(DATES[-1])[:10], "days": n} for d, n in DESKS.items()},
    }  # fmt: skip
