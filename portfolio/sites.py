"""Comparison of sites from the rows of one judgement: shares with intervals, and the same feature side by side.

No league table: a share of ten characteristics and one of four hundred differ mostly in how sure they are, so every
share carries its Wilson interval, and what could not be judged is counted in the open.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from portfolio.result import CELLS, NOT_JUDGED
from portfolio.statistics.proportions import wilson

NO_SITE = "(no site)"


def compare(results: pd.DataFrame, *, confidence: float = 0.95) -> dict[str, Any]:
    """Counts of the cells by site with Wilson intervals of each share, and families across sites.

    Parameters
    ----------
    results : rows of one judgement
    confidence : of each two-sided interval (Wilson 1927)

    Returns
    -------
    `rows`: one dict a site, sorted by name: site, characteristics, judged, counts (cell -> count), shares (cell ->
    (share, low, high) of the judged ones; the share of 'not judged' is of all).
    `families`: one dict for each family found at two or more sites: family, feature, unit, rows (site, characteristic,
    index_name, index, index_low, index_high, n, cell, mean, sigma_total), best index first.
    """
    frame = results.assign(site=results["site"].fillna(NO_SITE).replace("", NO_SITE))
    counts = pd.crosstab(frame["site"], frame["cell"]).reindex(columns=list(CELLS), fill_value=0)
    total = counts.sum(axis=1).to_numpy()
    judged = total - counts[NOT_JUDGED].to_numpy()
    shares = {
        cell: _interval(counts[cell].to_numpy(), total if cell == NOT_JUDGED else judged, confidence) for cell in CELLS
    }
    rows = [
        {
            "site": str(site),
            "characteristics": int(total[i]),
            "judged": int(judged[i]),
            "counts": {cell: int(counts[cell].iloc[i]) for cell in CELLS},
            "shares": {cell: tuple(float(part[i]) for part in shares[cell]) for cell in CELLS},
        }
        for i, site in enumerate(counts.index)
    ]
    return {"rows": rows, "families": _families(frame)}


def _interval(count: np.ndarray, of: np.ndarray, confidence: float) -> tuple[np.ndarray, ...]:
    """Share and its interval; NaN where nothing was counted."""
    low, high = wilson(count, of, confidence=confidence)
    with np.errstate(invalid="ignore", divide="ignore"):
        return count / of, low, high


def _families(frame: pd.DataFrame) -> list[dict[str, Any]]:
    named = frame[frame["family"].notna() & (frame["family"] != "")]
    out = []
    for family, members in named.groupby("family", sort=True):
        if members["site"].nunique() < 2:
            continue
        ordered = members.sort_values(["index", "characteristic"], ascending=[False, True], na_position="last")
        out.append(
            {
                "family": str(family),
                "feature": _first(ordered["feature"]),
                "unit": _first(ordered["unit"]),
                "rows": [
                    {
                        "site": row.site,
                        "characteristic": row.characteristic,
                        "index_name": row.index_name,
                        "index": row.judged_index,
                        "index_low": row.index_low,
                        "index_high": row.index_high,
                        "n": int(row.measurements),
                        "cell": row.cell,
                        "mean": row.mean,
                        "sigma_total": row.sigma_total,
                    }
                    for row in ordered.rename(columns={"index": "judged_index"}).itertuples(index=False)
                ],
            }
        )
    return out


def _first(column: pd.Series) -> str:
    there = column.dropna()
    return str(there.iloc[0]) if len(there) else ""
