"""The page of one characteristic, told as questions. No picture holds control limits and specification limits."""

from __future__ import annotations

from typing import Any

import pandas as pd

from portfolio.publishing import records, wording
from portfolio.publishing.numbers import Numbers, missing
from portfolio.publishing.page_first import place

CHART_WORDS = {
    "individuals": ("Single values", "moving range"),
    "mean and range": ("Subgroup means", "range"),
    "mean and s": ("Subgroup means", "standard deviation"),
    "three-way": ("Subgroup means, judged by their own moving range", "spread within the subgroup"),
}


def context(
    row: dict[str, Any], evidence: dict[str, Any] | None, history: pd.DataFrame | None, n: Numbers
) -> dict[str, Any]:
    """What characteristic.html lays out."""
    drawings: dict[str, Any] = {}
    pictures: dict[str, str] = {}
    if evidence is not None and row["stability"] != "not judged":
        drawings["control"], drawings["spread"] = records.control(row, evidence, n.zone)
        location, spread = CHART_WORDS[evidence["chart"]]
        pictures["control"] = _control_caption(row, evidence, location, n)
        beyond = sum(rule == "spread" for rule in evidence["signal_rule"])
        told = "not one lies" if not beyond else "1 lies" if beyond == 1 else f"{n.count(beyond)} lie"
        pictures["spread"] = f"The {spread} of each subgroup with its control limits; {told} beyond them."
    if evidence is not None:
        drawings["histogram"] = records.histogram(row, evidence)
        pictures["histogram"] = _histogram_caption(row, n)
    if not missing(row["cpk_centered"]) and row["centering"] != "already there":
        drawings["centering"] = records.centering(row)
        pictures["centering"] = (
            f"Dashed: now, mean {_value(row, 'mean', n)}. Solid: the same spread with the mean at "
            f"{_value(row, 'aim', n)}: Cpk {n.index(row['index'])} becomes {n.index(row['cpk_centered'])}."
        )
    if history is not None and len(history) > 1:
        drawings["history"] = records.history(history, row["target_cpk"], n.zone)
        pictures["history"] = (
            f"The judged index of {n.count(len(history))} judgements with its 95 % bounds; "
            f"target {n.index(row['target_cpk'])} dashed."
        )
    if drawings:
        drawings["decimal"] = n.decimal
    return {
        "name": row["characteristic"],
        "where": place(row),
        "verdict": wording.CELL[row["cell"]],
        "cell": row["cell"],
        "step": wording.step_sentence(row),
        "action": wording.action(row, n) if wording.proposed(row) else "",
        "rank": "" if missing(row["rank"]) else int(row["rank"]),
        "facts": _facts(row, n),
        "stability": [s for s in (wording.stability_sentence(row, n), wording.signals_sentence(row, n)) if s],
        "stability_answer": wording.stability_answer(row, n),
        "capability": wording.capability_sentence(row, n),
        "capability_answer": wording.capability_answer(row),
        "centering": wording.centering_sentence(row, n),
        "centering_answer": wording.centering_answer(row, n),
        "next": wording.next_step(row, n),
        "route": row["route"],
        "believe": wording.believe(row, n) if wording.proposed(row) else [],
        "answers": wording.answers(row, n) if wording.proposed(row) else [],
        "moved": _moved(row, n) if "centering" in pictures else [],
        "cautions": _cautions(row, n),
        "figures": _figures(row, n),
        "pictures": pictures,
        "drawings": drawings,
        "thinned": bool(evidence is not None and evidence["thinned"]),
        "drawn": n.count(len(evidence["taken"])) if evidence is not None else "",
        "data": _about_data(row, n),
    }


def neighbours(rows: list[dict[str, Any]]) -> dict[str, dict[str, Any]]:
    """The next and the previous page: by rank on the centering list, else by name."""
    listed = sorted((row for row in rows if not missing(row["rank"])), key=lambda row: row["rank"])
    others = [row for row in rows if missing(row["rank"])]
    order = listed + others
    out = {}
    for i, row in enumerate(order):
        out[row["characteristic"]] = {
            "before": {"page": order[i - 1]["page"], "name": order[i - 1]["characteristic"]} if i else None,
            "after": {"page": order[i + 1]["page"], "name": order[i + 1]["characteristic"]}
            if i + 1 < len(order)
            else None,
        }
    return out


def _moved(row: dict[str, Any], n: Numbers) -> list[dict[str, str]]:
    """The numbers of the centering picture: as it is, and with the mean at the aim."""
    return [
        {"name": "Mean", "now": _value(row, "mean", n), "after": _value(row, "aim", n)},
        {"name": "Cpk", "now": n.index(row["index"]), "after": n.index(row["cpk_centered"])},
        {
            "name": f"Chance that it reaches {n.index(row['target_cpk'])}",
            "now": n.chance(row["chance_now"]),
            "after": n.chance(row["chance_centered"]),
        },
        {
            "name": "Nonconforming parts per million, expected",
            "now": n.ppm(row["ppm_now"]),
            "after": n.ppm(row["ppm_centered"]),
        },
    ]


def _cautions(row: dict[str, Any], n: Numbers) -> list[str]:
    if wording.proposed(row):
        return wording.cautions(row, n)
    return [wording.CAUTION] if row["class"] in wording.SAFETY_CLASSES and row["capability"] == "not capable" else []


def _facts(row: dict[str, Any], n: Numbers) -> list[dict[str, str]]:
    limits = " … ".join(_value(row, name, n) if not missing(row[name]) else "none" for name in ("lsl", "usl"))
    out = [{"label": "Specification limits", "value": limits}]
    if not missing(row["mean"]):
        out.append({"label": "Mean", "value": _value(row, "mean", n)})
    if not missing(row["sigma_total"]):
        out.append(
            {
                "label": "Total standard deviation",
                "value": n.spread(row["sigma_total"], row["unit"]),
            }
        )
    if not missing(row["index"]):
        out.append(
            {
                "label": f"{row['index_name']} (95 % bounds)",
                "value": f"{n.index(row['index'])} ({n.index(row['index_low'])} to {n.index(row['index_high'])})",
            }
        )
        out.append({"label": "Target", "value": n.index(row["target_cpk"])})
    out.append(
        {
            "label": "Judged",
            "value": f"{n.counted(row['measurements'], 'value')} in {n.counted(row['subgroups'], 'subgroup')}",
        }
    )
    return out


def _figures(row: dict[str, Any], n: Numbers) -> list[dict[str, str]]:
    """Every index with its definition beside it, so that nobody mixes them up."""
    table = [
        ("Cp", "cp", "tolerance over six total standard deviations of the judged stretch"),
        ("Cpk", "cpk", "distance of the mean from the nearer limit over three total standard deviations"),
        (
            "Cp, within subgroups",
            "cp_within",
            "as Cp, with the spread inside the subgroups only: what would be there if all periods were alike",
        ),
        ("Cpk, within subgroups", "cpk_within", "as Cpk, with the spread inside the subgroups only"),
        ("Pp", "pp", "tolerance over six plain standard deviations of the whole window"),
        ("Ppk", "ppk", "as Cpk, with the plain standard deviation of the whole window: what was delivered"),
    ]
    return [
        {"name": name, "value": n.index(row[key]), "means": means}
        for name, key, means in table
        if not missing(row[key])
    ]


def _control_caption(row: dict[str, Any], evidence: dict[str, Any], location: str, n: Numbers) -> str:
    beyond = len(
        {int(i) for i, rule in zip(evidence["signal_index"], evidence["signal_rule"], strict=True) if rule != "spread"}
    )
    change = "" if missing(row["since"]) else f" The dotted line marks {n.date(row['since'])}."
    told = "No point carries" if not beyond else f"{n.counted(beyond, 'point')} {'carries' if beyond == 1 else 'carry'}"
    return (
        f"{location} over time. {told} a signal (diamond). The dashed lines are control limits: they come "
        f"from the process itself, not from the specification.{change}"
    )


def _histogram_caption(row: dict[str, Any], n: Numbers) -> str:
    outside, held = row["outside_observed"], n.counted(row["measurements"], "value")
    if missing(row["lsl"]) and missing(row["usl"]):
        return f"{held} of the judged stretch; no specification limit is registered."
    lie = "Not one lies" if not outside else "1 lies" if outside == 1 else f"{n.count(outside)} lie"
    return f"{held} of the judged stretch against the specification limits. {lie} outside."


def _about_data(row: dict[str, Any], n: Numbers) -> list[dict[str, str]]:
    out = [("Judged from", f"{n.time(row['first'])} to {n.time(row['last'])}")] if not missing(row["first"]) else []
    out.append(("Values in the whole window", n.count(row["window_measurements"])))
    if not missing(row["subgroup_size"]):
        out.append(("Values in a subgroup, on average", n.fixed(row["subgroup_size"], 1)))
    if not missing(row["distinct_values"]):
        out.append(("Distinct values", n.count(row["distinct_values"])))
    if not missing(row["recording_step"]):
        out.append(("Recorded in steps of", n.step(row["recording_step"], row["unit"])))
    if not missing(row["streams"]) and row["streams"]:
        out.append(("Streams", n.count(row["streams"])))
    if not missing(row["df_effective"]):
        out.append(("Effective degrees of freedom of the spread", n.fixed(row["df_effective"], 0)))
    if not missing(row["stability_q"]):
        out.append(
            (
                "Stability: p-value, and q-value over the whole portfolio",
                f"{_small(row['stability_p'], n)}, {_small(row['stability_q'], n)}",
            )
        )
    for key, label in (
        ("owner", "Owner"),
        ("class", "Class"),
        ("adjustable", "Adjustable"),
        ("why_not_adjustable", "Why not"),
    ):
        if not missing(row[key]):
            out.append((label, str(row[key])))
    return [{"label": label, "value": value} for label, value in out]


def _small(p: float, n: Numbers) -> str:
    return f"under {n.fixed(0.0001, 4)}" if p < 0.0001 else n.fixed(p, 4)


def _value(row: dict[str, Any], key: str, n: Numbers) -> str:
    return n.quantity(row[key], row["unit"], row["sigma_total"])
