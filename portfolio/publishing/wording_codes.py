"""What each code of a judgement means, in the words of the trade; the other wording modules build on these."""

from __future__ import annotations

CELL = {
    "stable, capable": "predictable and fits the tolerance",
    "stable, not capable": "predictable, does not fit the tolerance",
    "unstable, capable": "not predictable; what was delivered fitted the tolerance",
    "unstable, not capable": "not predictable; what was delivered did not fit the tolerance",
    "not judged": "not judged",
}
SHORT_CELL = {
    "stable, capable": "predictable, fits",
    "stable, not capable": "predictable, does not fit",
    "unstable, capable": "not predictable, fitted",
    "unstable, not capable": "not predictable, did not fit",
    "not judged": "not judged",
}
ROUTE = {
    "leave alone": "Leave it alone.",
    "re-centre": "Move the mean.",
    "narrow the spread": "Reduce the spread: moving the mean alone is not enough.",
    "align the streams": "Align the streams first: they aim at different places, and one common move cannot serve all.",
    "stabilise first": "Find and remove the cause of the change first.",
    "improve the gauge": "Improve the measurement first.",
    "check the data": "Check the data and the limits first.",
    "collect more": "Collect more values.",
}
NOT_JUDGED = {
    "no_data": "no value in the judged period",
    "silent": "no value for weeks: the flow of data has stopped",
    "too_few": "too few values to judge",
    "coarse": "the gauge is too coarse: the values move in steps as wide as the spread",
    "constant": "all values are equal: there is no variation to judge",
    "no_limits": "no specification limit is registered",
    "crossed_limits": "the registered limits are crossed",
    "outside_bound": "a value lies beyond a natural bound, which is impossible: check the data",
    "gauge_too_noisy": "the gauge's own variation makes up nearly all that is seen",
    "no_shape": "the values do not have the normal shape, so an index read off it would not be honest",
    "suspect_limits": "every value lies far outside: suspect the limits or the unit first",
    "sorted": "the values stop abruptly at a limit: they look sorted",
}
REMEDY = {
    "no_data": "Ask why nothing is measured, or take it out of the registry.",
    "silent": "Find out where the data stopped: source, name of the characteristic, or the measuring itself.",
    "too_few": "Keep measuring; 25 subgroups or more are usual for a first verdict (common practice).",
    "coarse": "Record more digits, or use a gauge with smaller steps.",
    "constant": "Check whether values are copied or rounded before they are recorded.",
    "no_limits": "Enter the specification limits in the registry.",
    "crossed_limits": "Correct the limits in the registry: the lower one must be below the upper one.",
    "outside_bound": "Look at the values beyond the bound, or correct the bound in the registry.",
    "gauge_too_noisy": "Improve the gauge before anything is said about the process.",
    "no_shape": "Look at the histogram: mixed streams, sorted parts, or a feature whose values are skewed by nature?",
    "suspect_limits": "Compare the specification limits and the unit in the registry with the drawing.",
    "sorted": "Ask whether parts are sorted before they are recorded, and judge the values from before the sorting.",
}
"What to do about it, beside each code of `NOT_JUDGED`."
CENTERING_REASON = {
    "one_sided": "Only one limit: there is no middle to move to; farther from the limit is better until cost stops "
    "you.",
    "natural_bound": "Zero is the ideal here: there is no middle to move to, only the spread can be reduced.",
    "economic_aim": "The mean stands off the middle on purpose (an aim or a give-away cost is registered): no "
    "centering project.",
    "coupled": "Moving this mean would move another characteristic.",
    "streams_differ": "The streams have different means: one common move cannot centre all of them.",
    "sorted": "The values look sorted; estimate the unsorted process first.",
    "already_centred": "The mean stands at its aim already: moving it would change nothing.",
    "capable_now": "The target is likely met as it is.",
    "not_registered": "No longer in the registry.",
    "not_alone": "Moving the mean alone would no longer be enough.",
}
LEFT = {
    "unstable": "no longer predictable",
    "not_judged": "no longer judged",
    "already there": "target reached",
    "capable_now": "target reached",
    "not alone": "moving the mean alone is no longer enough",
    "already_centred": "the mean is at its aim",
    "not_adjustable": "registered as not adjustable",
    "economic_aim": "off the middle on purpose",
    "streams_differ": "its streams differ",
    "coupled": "moving it would move another characteristic",
    "one_sided": "only one limit is registered now",
    "natural_bound": "zero is the ideal: there is no middle",
    "sorted": "its values look sorted",
    "not_registered": "no longer registered",
}
CAUTION = (
    "This characteristic protects people or is critical. Contain and sort first where parts may be outside; projects "
    "come after. Customer requirements, legal rules and licensed practice go before anything said here."
)
SAFETY_CLASSES = ("critical", "safety")
