"""The columns of a judgement, by name: what the contract promises and what we add to it.

Codes live here; their sentences live in `publishing/wording.py`.
"""

from __future__ import annotations

CONTRACT_COLUMNS = (
    "characteristic", "site", "part", "operation", "feature", "unit", "lsl", "usl", "target_cpk",
    "measurements", "subgroups", "first", "last",
    "mean", "sigma_within", "sigma_total", "shape",
    "cp", "cpk", "cp_within", "cpk_within", "pp", "ppk",
    "stability", "stability_p", "stability_q", "signals", "expected_signals", "instability", "since",
    "capability", "close_call", "index_name", "index", "index_low", "index_high", "chance_now",
    "cell", "centering", "centering_reason",
    "aim", "move", "move_least", "aim_low", "aim_high", "cpk_centered", "chance_centered",
    "ppm_now", "ppm_centered", "saving_per_year", "rank", "route", "reasons",
)  # fmt: skip
"""Promised to users, in this order (contract). `reasons` holds sentences; the store keeps `reason_codes`."""

STABLE, UNSTABLE, NOT_JUDGED = "stable", "unstable", "not judged"
CAPABLE, NOT_CAPABLE = "capable", "not capable"
CELLS = ("stable, capable", "stable, not capable", "unstable, capable", "unstable, not capable", "not judged")
CENTERING = ("reaches", "may reach", "not alone", "already there", "does not apply")
ROUTES = (
    "leave alone", "re-centre", "narrow the spread", "align the streams", "stabilise first",
    "improve the gauge", "check the data", "collect more",
)  # fmt: skip

NOT_JUDGED_CODES = (
    "no_data",  # no value in the window
    "silent",  # values, but none for plan.judgement.silent_days
    "too_few",  # fewer than 20 subgroups or 30 values
    "coarse",  # three or fewer distinct values, or recording step above 2 sd
    "constant",  # no variation at all
    "no_limits",  # neither lsl nor usl
    "crossed_limits",
    "outside_bound",  # a value beyond a natural bound: data error
    "gauge_too_noisy",
    "no_shape",  # no known shape fits
    "suspect_limits",  # every value far outside: suspect the limits or the unit first
    "sorted",  # looks sorted at the limit
)
CENTERING_CODES = (
    "one_sided", "natural_bound", "economic_aim", "coupled", "streams_differ", "sorted", "already_centred",
    "not_adjustable", "unstable", "not_judged", "capable_now",
)  # fmt: skip
INSTABILITY_KINDS = (
    "step",
    "several steps",
    "drift",
    "wandering",
    "cycle",
    "alternation",
    "spread",
    "isolated extremes",
)
STABILITY_NOTES = ("layers", "negligible", "autocorrelated", "short")
