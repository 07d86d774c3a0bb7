"""From verdicts to decisions: cell, centering answer, route, ranking, and why (as codes).

The centering list answers one question only: where would moving the mean ALONE bring a predictable process to its
target? Its order is expected benefit times chance; its entry gate keeps lucky small samples out
(capability study, sections 5 and 7).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from portfolio.judgement import STREAMS_DIFFER_P
from portfolio.plan import Judgement
from portfolio.result import CAPABLE, NOT_CAPABLE, NOT_JUDGED, STABLE, UNSTABLE

STREAMS_SHARE = 0.10
"Streams that differ matter when their differences make up at least this share of the total variance."
GAUGE_SHARE = 0.5
"Gauge variance as a share of the observed variance from which a better gauge is the first step."
LEAST_PPM = 10.0
"Differences below this are tail statements of an assumed shape and do not rank (capability study, section 7)."

COLLECT = {"no_data", "silent", "too_few"}
GAUGE = {"coarse", "gauge_too_noisy"}


@dataclass(frozen=True)
class Decisions:
    """`results`: one row per characteristic, ready for the store. `ranking`: the list and what has left it."""

    results: pd.DataFrame
    ranking: pd.DataFrame


def decide(
    concluded: pd.DataFrame, registry: pd.DataFrame, settings: Judgement, previous: pd.DataFrame | None = None
) -> Decisions:
    """Sort every characteristic and rank the centering list.

    Parameters
    ----------
    concluded : rows of `conclusion.conclude`, one per characteristic
    registry : matching registry rows, same order
    previous : ranking of the judgement before (characteristic, rank), for hysteresis and 'new / stays / left'
    """
    out = concluded.copy()
    for name in ("site", "part", "operation", "machine", "feature", "family", "owner", "class", "unit", "lsl", "usl",
                 "adjustable", "why_not_adjustable", "move_effort"):  # fmt: skip
        out[name] = registry[name].to_numpy()
    judged = ((out["stability"] != NOT_JUDGED) & (out["capability"] != NOT_JUDGED)).to_numpy()
    out["cell"] = np.where(judged, out["stability"] + ", " + out["capability"], NOT_JUDGED)

    listed_before = set() if previous is None else set(previous.loc[previous["rank"].notna(), "characteristic"])
    stayed = out["characteristic"].isin(listed_before).to_numpy()
    _answer_centering(out, registry, settings, judged, stayed)
    _hide_what_does_not_apply(out)
    _value(out, registry)
    _rank(out, settings, stayed)
    _route(out, registry)
    out["reason_codes"] = _reasons(out)
    return Decisions(results=out, ranking=_ranking(out, previous))


def _answer_centering(out: pd.DataFrame, registry: pd.DataFrame, settings: Judgement, judged, stayed) -> None:  # type: ignore[no-untyped-def]
    total = out["sigma_total"].to_numpy() ** 2
    with np.errstate(invalid="ignore", divide="ignore"):
        share = np.nan_to_num(out["sigma_stream"].to_numpy() ** 2 / total)
    out["streams_means_differ"] = (out["stream_p"].to_numpy() < STREAMS_DIFFER_P) & (share >= STREAMS_SHARE)
    two = registry["lsl"].notna().to_numpy() & registry["usl"].notna().to_numpy()
    lower_ideal = registry["lower_bound"].notna().to_numpy() & registry["lsl"].isna().to_numpy()
    upper_ideal = registry["upper_bound"].notna().to_numpy() & registry["usl"].isna().to_numpy()
    chance = out["chance_centered"].to_numpy()
    now = out["chance_now"].to_numpy()
    index_enough = out["index"].to_numpy() >= out["target_cpk"].to_numpy()
    gate = np.where(stayed, settings.keep_chance, settings.list_chance)
    off_middle = out["aim_off_middle"].to_numpy(dtype=bool)
    giveaway = registry["giveaway_cost_per_unit"].notna().to_numpy()
    at_aim = ~out["move_significant"].to_numpy(dtype=bool)

    cases = [  # the first that applies decides
        (~judged, "does not apply", "not_judged"),
        (out["stability"].to_numpy() == UNSTABLE, "does not apply", "unstable"),
        (~two & (lower_ideal | upper_ideal), "does not apply", "natural_bound"),
        (~two, "does not apply", "one_sided"),
        (giveaway, "does not apply", "economic_aim"),
        (index_enough | (now >= 0.5), "already there", "capable_now"),
        (out["streams_means_differ"].to_numpy(), "does not apply", "streams_differ"),
        (off_middle & (at_aim | (chance < gate)), "does not apply", "economic_aim"),
        (at_aim, "not alone", "already_centred"),
        ((registry["adjustable"].fillna("unknown") == "no").to_numpy(), "does not apply", "not_adjustable"),
        (chance >= settings.should_reach_chance, "reaches", ""),
        (chance >= gate, "may reach", ""),
    ]
    out["centering"] = np.select([c[0] for c in cases], [c[1] for c in cases], default="not alone")
    out["centering_reason"] = np.select([c[0] for c in cases], [c[2] for c in cases], default="")


def _hide_what_does_not_apply(out: pd.DataFrame) -> None:
    """No number of a move where a move is no answer: an empty cell misleads nobody."""
    reason = out["centering_reason"]
    no_move = reason.isin(["not_judged", "unstable", "natural_bound", "one_sided"])
    for name in ("aim", "move", "move_least", "aim_low", "aim_high", "cpk_centered", "cpk_centered_low",
                 "chance_centered", "ppm_centered"):  # fmt: skip
        out[name] = out[name].where(~no_move)
    unstable = out["stability"] != STABLE
    for name in ("cp", "cpk", "cp_within", "cpk_within"):  # Cp and Cpk describe a predictable process only
        out[name] = out[name].where(~unstable)


def _value(out: pd.DataFrame, registry: pd.DataFrame) -> None:
    """Parts and money a year that a move is expected to save; empty where volume or cost is not registered."""
    avoided = (out["ppm_now"] - out["ppm_centered"]).clip(lower=0)
    listed = out["centering"].isin(["reaches", "may reach"])
    out["parts_per_year"] = (avoided * 1e-6 * registry["annual_volume"].to_numpy()).where(listed)
    out["saving_per_year"] = out["parts_per_year"] * registry["cost_per_nonconforming"].to_numpy()
    out["saving_low"], out["saving_high"] = np.nan, np.nan
    out["currency"] = registry["cost_currency"].to_numpy()


def _rank(out: pd.DataFrame, settings: Judgement, stayed) -> None:  # type: ignore[no-untyped-def]
    """Places on the list: by money, then those without cost by parts, then those without volume by ppm.

    Each lack forms a group of its own behind the others and is never counted as zero; amounts of another currency
    than the most frequent cannot be compared and rank by parts.
    """
    listed = out["centering"].isin(["reaches", "may reach"])
    chance = out["chance_centered"]
    avoided = (out["ppm_now"] - out["ppm_centered"]).clip(lower=0)
    priced = out["saving_per_year"].notna() & listed
    main = out.loc[priced, "currency"].mode()
    comparable = priced & (out["currency"].isna() | out["currency"].isin(main.head(1)))
    counted = out["parts_per_year"].notna() & listed & ~comparable
    group = np.select([comparable, counted], [0, 1], default=2)
    amount = np.select([comparable, counted], [out["saving_per_year"], out["parts_per_year"]], default=avoided)
    out["score"] = pd.Series(amount * chance, index=out.index).where(listed)
    trivial = (avoided < LEAST_PPM).to_numpy()
    order = pd.DataFrame(
        {"group": group, "trivial": trivial, "score": -out["score"], "chance": -chance, "name": out["characteristic"]}
    )[listed.to_numpy()].sort_values(["trivial", "group", "score", "chance", "name"], kind="stable")
    rank = pd.Series(pd.NA, index=out.index, dtype="Int64")
    rank.loc[order.index] = np.arange(1, len(order) + 1)
    out["rank"] = rank
    out["rank_group"] = np.where(listed, np.array(["money", "parts", "ppm"])[group], "")


def _route(out: pd.DataFrame, registry: pd.DataFrame) -> None:
    note = out["capability_note"]
    stability_note = out["stability_note"]
    total = out["sigma_total"].to_numpy() ** 2
    with np.errstate(invalid="ignore", divide="ignore"):
        gauge_share = registry["gauge_sd"].to_numpy(dtype=np.float64) ** 2 / total
    reason = out["centering_reason"]
    not_judged = (out["cell"] == NOT_JUDGED).to_numpy()
    unjudged_stability = (out["stability"] == NOT_JUDGED).to_numpy()
    cases = [
        (not_judged & note.isin(COLLECT), "collect more"),
        (not_judged & note.isin(GAUGE), "improve the gauge"),
        (not_judged & unjudged_stability & stability_note.isin(COLLECT) & (note == ""), "collect more"),
        (not_judged, "check the data"),
        ((out["stability"] == UNSTABLE), "stabilise first"),
        (reason == "economic_aim", "leave alone"),
        (out["capability"] == CAPABLE, "leave alone"),
        (reason == "capable_now", "collect more"),
        (out["streams_means_differ"], "align the streams"),
        (out["centering"].isin(["reaches", "may reach"]) | (reason == "not_adjustable") & (out["chance_centered"] >= 0.5),
         "re-centre"),
        (gauge_share >= GAUGE_SHARE, "improve the gauge"),
    ]  # fmt: skip
    out["route"] = np.select([np.asarray(c[0], dtype=bool) for c in cases], [c[1] for c in cases], "narrow the spread")


def _reasons(out: pd.DataFrame) -> list[list[str]]:
    """Codes, most important first; `publishing.wording` turns each into a sentence."""
    columns = [
        np.where(out["cell"] == NOT_JUDGED, "not_judged:" + out["capability_note"].astype(str), ""),
        np.where(out["stability"] == UNSTABLE, "unstable:" + out["instability"].astype(str), ""),
        np.where(out["centering"].isin(["reaches", "may reach", "not alone"]), "centering:" + out["centering"], ""),
        np.where(
            (out["centering_reason"] != "") & ~out["centering_reason"].isin(["not_judged", "unstable"]),
            "centering_reason:" + out["centering_reason"],
            "",
        ),
        np.where((out["capability"] == NOT_CAPABLE) & (out["stability"] == STABLE), "not_capable", ""),
        np.where(out["close_call"], "close_call", ""),
        np.where(out["stability"] == STABLE, "stable", ""),
        np.where(
            (out["stability"] == STABLE) & (out["stability_note"] != ""),
            "stable:" + out["stability_note"].astype(str),
            "",
        ),
        np.where((out["stability"] == UNSTABLE) & out["settled_since"].notna(), "settled", ""),
    ]
    return [[code for code in codes if code] for codes in zip(*columns, strict=True)]


def _ranking(out: pd.DataFrame, previous: pd.DataFrame | None) -> pd.DataFrame:
    """The list of this run with 'new' or 'stays', and the items of the run before that have left it, with a reason."""
    listed = out[out["rank"].notna()].sort_values("rank")
    before = set() if previous is None else set(previous.loc[previous["rank"].notna(), "characteristic"])
    now = pd.DataFrame(
        {
            "rank": listed["rank"],
            "characteristic": listed["characteristic"],
            "status": np.where(listed["characteristic"].isin(before), "stays", "new"),
            "reason": "",
        }
    )
    gone = out[out["characteristic"].isin(before - set(listed["characteristic"]))]
    left = pd.DataFrame(
        {
            "rank": pd.array([pd.NA] * len(gone), dtype="Int64"),
            "characteristic": gone["characteristic"],
            "status": "left",
            "reason": np.where(gone["centering_reason"] != "", gone["centering_reason"], gone["centering"]),
        }
    )
    unknown = sorted(before - set(out["characteristic"]))
    removed = pd.DataFrame(
        {"rank": pd.array([pd.NA] * len(unknown), dtype="Int64"), "characteristic": unknown, "status": "left",
         "reason": "not_registered"}
    )  # fmt: skip
    parts = [part for part in (now, left, removed) if len(part)]
    return pd.concat(parts, ignore_index=True) if parts else now
