"""The registry: every characteristic with its limits over time, checked as a whole.

One row per characteristic and validity period. Errors stop a run before anything is changed; warnings go to the
terminal and to the report, because a characteristic without limits is still worth a row that says so.
"""

from __future__ import annotations

import difflib
import hashlib
import io
import json
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from portfolio.errors import Problem, RegistryError
from portfolio.plan import Plan

TEXT = (
    "characteristic", "site", "part", "operation", "machine", "feature", "unit", "class", "shape", "adjustable",
    "why_not_adjustable", "move_effort", "expected", "cost_currency", "owner", "family",
)  # fmt: skip
NUMBERS = (
    "lsl", "usl", "target_cpk", "aim", "lower_bound", "upper_bound", "subgroup_size", "subgroup_minutes", "gauge_sd",
    "gauge_df", "resolution", "annual_volume", "cost_per_nonconforming", "giveaway_cost_per_unit", "price",
    "reject_price",
)  # fmt: skip
WORDS = pd.StringDtype(na_value=np.nan)
COLUMNS = (*TEXT, *NUMBERS, "valid_from")
SHAPES = ("normal", "lognormal", "weibull", "gamma", "folded normal", "half-normal", "rayleigh")
TYPES = ("dimension", "form", "concentration")
NOT_NEGATIVE = (
    "gauge_sd", "gauge_df", "resolution", "annual_volume", "cost_per_nonconforming", "giveaway_cost_per_unit", "price",
)  # fmt: skip


@dataclass(frozen=True)
class Registry:
    """Typed rows (COLUMNS plus `row`, the line of the file) and what is wrong with them."""

    rows: pd.DataFrame
    problems: list[Problem]

    @property
    def errors(self) -> list[Problem]:
        """Problems that forbid a run."""
        return [problem for problem in self.problems if problem.severity == "error"]

    @property
    def warnings(self) -> list[Problem]:
        """Problems that the report shows."""
        return [problem for problem in self.problems if problem.severity == "warning"]

    @classmethod
    def from_frame(cls, frame: pd.DataFrame, targets: Mapping[str, float]) -> Registry:
        """A checked registry from a frame; `RegistryError` lists every error."""
        registry = _checked(frame, targets, "registry", first_row=0)
        if registry.errors:
            raise RegistryError(registry.errors)
        return registry

    def as_of(self, moment: datetime) -> pd.DataFrame:
        """One row per characteristic valid at `moment` (aware), sorted by name.

        Adds `limits_since`: when the row's limits came into force (NaT: always, or the first ones).
        """
        if moment.tzinfo is None:
            raise ValueError("as_of needs a time with a zone")
        at = pd.Timestamp(moment).tz_convert("UTC").tz_localize(None)
        begun = self.rows[self.rows["valid_from"].isna() | (self.rows["valid_from"] <= at)]
        ordered = begun.sort_values(["characteristic", "valid_from"], na_position="first", kind="stable")
        newest = ordered.drop_duplicates("characteristic", keep="last")
        earlier = ordered[ordered.duplicated("characteristic", keep="last")]["characteristic"]
        # The first limits of a characteristic begin no new stretch: nothing was judged against others before.
        renewed = newest["characteristic"].isin(earlier)
        return newest.assign(limits_since=newest["valid_from"].where(renewed)).reset_index(drop=True)

    def units(self) -> dict[str, str]:
        """Unit of each registered characteristic ('' where none is given)."""
        newest = self.rows.drop_duplicates("characteristic", keep="last")
        return dict(zip(newest["characteristic"], newest["unit"].fillna(""), strict=True))

    def to_json(self) -> str:
        """The rows as JSON, the same text for the same content whatever the order of columns in the file."""
        frame = self.rows[list(COLUMNS)].sort_values(
            ["characteristic", "valid_from"], na_position="first", kind="stable"
        )
        out = frame.assign(valid_from=frame["valid_from"].dt.strftime("%Y-%m-%dT%H:%M:%S"))
        rows = [{key: value for key, value in row.items() if not pd.isna(value)} for row in out.to_dict("records")]
        return json.dumps(rows, ensure_ascii=False, sort_keys=True)

    @classmethod
    def from_json(cls, text: str) -> Registry:
        """The registry that `to_json` wrote."""
        frame = pd.DataFrame(json.loads(text)).reindex(columns=list(COLUMNS))
        typed, _ = _typed(frame, _Places("stored registry", 0))
        return cls(typed, [])

    def sha256(self) -> str:
        """Digest of the content."""
        return hashlib.sha256(self.to_json().encode()).hexdigest()


def read(path: Path, plan: Plan) -> Registry:
    """Read a registry from CSV, Parquet or XLSX, with all problems found."""
    ending = path.suffix.lower()
    readers: dict[str, Callable[[Path], pd.DataFrame]] = {".csv": _csv, ".parquet": _parquet, ".xlsx": _xlsx}
    if ending not in readers:
        raise RegistryError(
            [
                Problem(
                    str(path),
                    f"a registry cannot be a {ending or 'file without ending'}",
                    "Use .csv, .parquet or .xlsx",
                )
            ]
        )
    if not path.is_file():
        raise RegistryError([Problem(str(path), "there is no such file", "Correct `registry` in the plan")])
    return _checked(readers[ending](path), plan.targets, path.name, first_row=2)


def read_checked(path: Path, plan: Plan) -> Registry:
    """Read a registry; `RegistryError` lists every error."""
    registry = read(path, plan)
    if registry.errors:
        raise RegistryError(registry.errors)
    return registry


def _csv(path: Path) -> pd.DataFrame:
    content = path.read_bytes()
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        raise RegistryError(
            [Problem(f"{path.name}, row {line}", "the text is not UTF-8", "Save the file as CSV UTF-8")]
        ) from None
    header = text.split("\n", 1)[0]
    delimiter = max(",;\t", key=header.count)
    try:
        frame = pd.read_csv(
            io.StringIO(text), sep=delimiter, dtype=str, keep_default_na=False, skip_blank_lines=False, index_col=False
        )
    except (pd.errors.ParserError, pd.errors.EmptyDataError) as error:
        raise RegistryError([Problem(path.name, f"not a table: {error}", "Check the delimiter and quotes")]) from None
    if delimiter == ";":
        for name in frame.columns.intersection(NUMBERS):
            frame[name] = frame[name].str.replace(",", ".", regex=False)
    return frame


def _parquet(path: Path) -> pd.DataFrame:
    import pyarrow as pa

    try:
        return pd.read_parquet(path)
    except (pa.ArrowInvalid, OSError) as error:
        raise RegistryError([Problem(path.name, f"not a Parquet file: {error}", "Write the file again")]) from None


def _xlsx(path: Path) -> pd.DataFrame:
    from python_calamine import CalamineError, CalamineWorkbook

    try:
        rows = CalamineWorkbook.from_path(str(path)).get_sheet_by_index(0).to_python()
    except (CalamineError, OSError) as error:
        raise RegistryError([Problem(path.name, f"not a workbook: {error}", "Save it as .xlsx again")]) from None
    if not rows:
        raise RegistryError([Problem(path.name, "the first sheet is empty", "Put the registry on the first sheet")])
    return pd.DataFrame(rows[1:], columns=[str(name).strip() for name in rows[0]], dtype=object)


@dataclass(frozen=True)
class _Places:
    name: str
    first_row: int

    def __call__(self, index: int, column: str = "") -> str:
        return f"{self.name}, row {index + self.first_row}" + (f", {column}" if column else "")


def _checked(frame: pd.DataFrame, targets: Mapping[str, float], name: str, first_row: int) -> Registry:
    place = _Places(name, first_row)
    frame = frame.rename(columns=lambda column: str(column).strip()).reset_index(drop=True)
    problems = []
    for column in frame.columns[~frame.columns.isin(COLUMNS)]:
        near = difflib.get_close_matches(column, COLUMNS, n=1, cutoff=0.6)
        remedy = f"Did you mean '{near[0]}'?" if near else f"Known columns: {', '.join(COLUMNS)}"
        problems.append(Problem(name, f"unknown column '{column}'", remedy))
    for column in frame.columns[frame.columns.duplicated()].unique():
        problems.append(Problem(name, f"column '{column}' stands twice", "Remove one"))
    frame = frame.loc[:, ~frame.columns.duplicated()]
    if "characteristic" not in frame.columns:
        problems.append(Problem(name, "there is no column 'characteristic'", "Add it: the name that measurements use"))
        return Registry(_typed(frame.iloc[:0].reindex(columns=list(COLUMNS)), place)[0], problems)
    frame = frame[~frame.map(_blank).all(axis=1)]
    rows, unreadable = _typed(frame.reindex(columns=list(COLUMNS)), place)
    problems += unreadable
    problems += _contradictions(rows, targets, place)
    default = targets.get("default", 1.33)
    by_class = rows["class"].map(dict(targets)).fillna(default)
    rows["target_cpk"] = rows["target_cpk"].fillna(by_class)
    return Registry(rows, problems)


def _blank(value: Any) -> bool:
    return (
        value is None or (isinstance(value, str) and not value.strip()) or (np.isscalar(value) and bool(pd.isna(value)))
    )


def _typed(frame: pd.DataFrame, place: _Places) -> tuple[pd.DataFrame, list[Problem]]:
    """The columns with their types; what cannot be read becomes empty and a problem."""
    problems = []
    out = pd.DataFrame(index=frame.index)
    for column in TEXT:
        out[column] = frame[column].map(lambda value: None if _blank(value) else _as_text(value)).astype(WORDS)
    for column in NUMBERS:
        given = frame[column]
        numbers = pd.to_numeric(given.map(lambda value: None if _blank(value) else value), errors="coerce")
        out[column] = numbers.astype(np.float64).where(np.isfinite(numbers.astype(np.float64)))
        for index in given.index[~given.map(_blank).astype(bool) & out[column].isna()]:
            problems.append(
                Problem(place(index, column), f"'{given[index]}' is not a number", "Correct it or leave it empty")
            )
    given = frame["valid_from"]
    stamps = pd.to_datetime(
        given.map(lambda value: None if _blank(value) else str(value)), errors="coerce", utc=True, format="ISO8601"
    )
    out["valid_from"] = stamps.dt.tz_localize(None).astype("datetime64[us]")
    for index in given.index[~given.map(_blank).astype(bool) & out["valid_from"].isna()]:
        problems.append(Problem(place(index, "valid_from"), f"'{given[index]}' is not a date", "Use YYYY-MM-DD"))
    out["row"] = frame.index + place.first_row
    return out, problems


def _as_text(value: Any) -> str:
    return str(int(value)) if isinstance(value, float) and value.is_integer() else str(value).strip()


def _contradictions(rows: pd.DataFrame, targets: Mapping[str, float], place: _Places) -> list[Problem]:
    problems: list[Problem] = []

    def report(bad: Any, column: str, what: Callable[[pd.Series], str], remedy: str, severity: Any = "error") -> None:
        for index in rows.index[np.asarray(bad, dtype=bool)]:
            problems.append(Problem(place(index, column), what(rows.loc[index]), remedy, severity))

    lower, upper, named = rows["lsl"], rows["usl"], rows["characteristic"]
    report(named.isna(), "characteristic", lambda r: "the name is missing", "Give the name that measurements use")
    twice = rows.duplicated(["characteristic", "valid_from"], keep="first") & named.notna()
    report(twice, "characteristic", lambda r: f"'{r['characteristic']}' stands twice for the same valid_from",
           "Remove one row, or give the later limits a valid_from")  # fmt: skip
    report(lower >= upper, "lsl", lambda r: f"the lower limit {r['lsl']:g} is not below the upper limit {r['usl']:g}",
           "Swap or correct the limits")  # fmt: skip
    report(lower.isna() & upper.isna(), "lsl", lambda r: f"'{r['characteristic']}' has no specification limit",
           "Add lsl, usl or both; without them its capability is not judged", "warning")  # fmt: skip
    report(
        rows["target_cpk"] < 1, "target_cpk", lambda r: f"the target {r['target_cpk']:g} is below 1", "Use 1 or more"
    )
    known = rows["class"].isna() | rows["class"].isin(list(targets))
    report(
        ~known,
        "class",
        lambda r: f"unknown class '{r['class']}'",
        f"Use one of the plan's [targets]: {', '.join(targets)}",
    )
    report((rows["aim"] <= lower) | (rows["aim"] >= upper), "aim",
           lambda r: f"the aim {r['aim']:g} lies outside the limits", "Correct the aim or the limits")  # fmt: skip
    report(rows["lower_bound"] >= upper, "lower_bound",
           lambda r: f"the natural bound {r['lower_bound']:g} is not below the upper limit", "Correct one")  # fmt: skip
    report(rows["upper_bound"] <= lower, "upper_bound",
           lambda r: f"the natural bound {r['upper_bound']:g} is not above the lower limit", "Correct one")  # fmt: skip
    report(rows["lower_bound"] >= rows["upper_bound"], "lower_bound",
           lambda r: "the natural bounds are crossed", "Correct one")  # fmt: skip
    report(rows["lower_bound"] > lower, "lsl",
           lambda r: f"the lower limit {r['lsl']:g} is below the natural bound {r['lower_bound']:g}",
           "A value there is impossible: leave lsl empty", "warning")  # fmt: skip
    for column, allowed in (
        ("adjustable", ("yes", "no", "unknown")),
        ("expected", ("autocorrelation", "wear")),
        ("shape", (*SHAPES, *TYPES)),
    ):
        bad = rows[column].notna() & ~rows[column].isin(allowed)
        report(bad, column, _unknown(column), f"Use {', '.join(allowed)} or leave it empty")
    report((rows["adjustable"] == "no") & rows["why_not_adjustable"].isna(), "why_not_adjustable",
           lambda r: f"'{r['characteristic']}' cannot be adjusted, but no reason is given",
           "Say why: the weekly review will ask", "warning")  # fmt: skip
    report(rows["subgroup_size"] < 1, "subgroup_size", lambda r: "a subgroup has at least one value", "Use 1 or more")
    report(rows["subgroup_size"] % 1 > 0, "subgroup_size", lambda r: "a subgroup size is a whole number", "Correct it")
    report(rows["subgroup_minutes"] <= 0, "subgroup_minutes", lambda r: "a time must be above 0", "Correct it")
    for column in NOT_NEGATIVE:
        report(rows[column] < 0, column, _negative(column), "Correct the sign")
    problems += _unlike_units(rows, place)
    return sorted(problems, key=lambda problem: (problem.severity, problem.place))


def _unknown(column: str) -> Callable[[pd.Series], str]:
    return lambda row: f"unknown {column} '{row[column]}'"


def _negative(column: str) -> Callable[[pd.Series], str]:
    return lambda row: f"{column} is negative ({row[column]:g})"


def _unlike_units(rows: pd.DataFrame, place: _Places) -> list[Problem]:
    """Units that differ for one characteristic or inside one family cannot be compared."""
    problems = []
    for key in ("family", "characteristic"):
        some = rows[rows[key].notna() & rows["unit"].notna()]
        mixed = some.groupby(key)["unit"].nunique()
        for name in mixed.index[mixed > 1]:
            members = some[some[key] == name]
            units = ", ".join(sorted(members["unit"].unique()))
            problems.append(
                Problem(place(members.index[0], "unit"), f"{key} '{name}' has different units ({units})",
                        "Use one unit, and limits in that unit")
            )  # fmt: skip
    return problems
