"""Published numbers of false discovery control and autocorrelation, by the product's public functions."""

from __future__ import annotations

from typing import Any

import numpy as np

from portfolio.statistics import discoveries, exchangeability


def false_discoveries(case: dict[str, Any]) -> dict[str, Any]:
    """Benjamini & Hochberg's own example; a row that was not judged (NaN) must not count."""
    p = np.array([*case["inputs"]["p"], np.nan])
    q = discoveries.adjusted(p)
    assert np.isnan(q[-1])
    return {"rejected_BH": int((q <= case["inputs"]["q"]).sum()), "adjusted_first5": q[:5].tolist()}


def lag_one(case: dict[str, Any]) -> dict[str, Any]:
    """Lag-1 autocorrelation of the values themselves."""
    return {"acf_lag1": float(exchangeability.lag_one(np.array(case["inputs"]["x"])[None, :])[0])}
