"""What the pages of an issue say: counts, names, alarms, lists; the templates only lay it out."""

import json
import re
from dataclasses import replace
from html import unescape

import pandas as pd
import pytest

from portfolio.publishing import names as page_names
from portfolio.publishing import (
    page_alarms,
    page_characteristic,
    page_first,
    page_list,
    page_meeting,
    page_others,
    pages,
)
from portfolio.publishing.numbers import Numbers
from portfolio.store import Store
from tests.publishing import issue
from tests.publishing.sample import LONG, page_data

DATA = page_data(hostile=False)
N = Numbers(zone="Europe/Vienna")
RESULTS = DATA.results


def rows_of(data: pages.PageData) -> list[dict]:
    return [dict(row, page=page_names.page(row["characteristic"])) for row in data.results.to_dict("records")]


ROWS = rows_of(DATA)
BY_NAME = {row["characteristic"]: row for row in ROWS}


def only(data: pages.PageData, keep: pd.Series) -> pages.PageData:
    """The same issue with some of its characteristics."""
    left = data.results[keep.to_numpy()].reset_index(drop=True)
    listed = data.ranking[data.ranking["characteristic"].isin(left["characteristic"])]
    return replace(data, results=left, ranking=listed, evidence=data.evidence[data.evidence["characteristic"].isin(left["characteristic"])])  # fmt: skip


def text_of(html: str) -> str:
    body = re.sub(r"<(script|style)\b.*?</\1>", " ", html, flags=re.S)
    return " ".join(unescape(re.sub(r"<[^>]+>", " ", body)).split())


@pytest.fixture(scope="module")
def first() -> dict:
    return page_first.context(DATA, ROWS, N)


def test_the_first_screen_proposes_the_best_of_the_list_and_no_more_than_the_plan_says(first):
    ranked = RESULTS[RESULTS["rank"].notna()].sort_values("rank")["characteristic"].tolist()
    assert [card["name"] for card in first["cards"]] == ranked[:3]
    assert [line["name"] for line in first["next"]] == ranked[3:28]
    two = page_data(hostile=False, report={"cards": 2})
    assert len(page_first.context(two, rows_of(two), N)["cards"]) == 2


def test_a_card_says_what_to_do_what_it_brings_why_to_believe_it_and_what_could_be_wrong(first):
    card, row = first["cards"][0], BY_NAME["R1 bore"]
    assert card["action"].startswith("Lower the mean by 0.0104")
    assert (card["now"], card["after"]) == (f"{row['index']:.2f}", f"{row['cpk_centered']:.2f}")
    assert card["likely"] == "very likely" and "99" in card["chance"]
    assert len(card["believe"]) >= 3 and card["cautions"]
    assert "<svg" in card["picture"] and "1.33" in card["caption"]
    assert card["saving"][0].endswith("EUR") and card["saving"][1].endswith("parts")


def test_counts_of_the_first_screen_are_those_of_the_judgement(first):
    counts = RESULTS["cell"].value_counts()
    assert {cell: int(number) for cell, number in first["cells"].items()} == {
        cell: int(counts.get(cell, 0)) for cell in first["cells"]
    }
    routes = {route["route"]: int(route["number"]) for route in first["routes"]}
    assert routes == RESULTS["route"].value_counts().to_dict()
    assert sum(int(item["number"]) for item in first["not_judged"]) == counts["not judged"]


def test_the_bar_shows_shares_that_fill_it(first):
    counts = RESULTS["cell"].value_counts()
    assert [part["cell"] for part in first["bar"]] == [cell for cell in first["cells"] if counts.get(cell, 0)]
    for part in first["bar"]:
        assert part["width"] == pytest.approx(1000 * counts[part["cell"]] / len(RESULTS) - 2, abs=0.1)
    last = first["bar"][-1]
    assert last["x"] + last["width"] == pytest.approx(998, abs=0.2)


def test_the_chances_of_the_list_are_added_up(first):
    listed = RESULTS[RESULTS["rank"].notna()]
    short = (1 - listed["chance_centered"]).sum()
    assert short < 0.95 and "fewer than one" in first["expected_short"]
    doubtful = [
        {**row, "chance_centered": 0.6} for row in ROWS if row["rank"] == row["rank"] and row["rank"] is not pd.NA
    ]
    assert f"about {round(0.4 * len(doubtful))} will" in page_first._expected_short(doubtful, N)


@pytest.mark.parametrize(
    ("number", "words"), [(0, "Nothing to re-centre"), (1, "Start this one"), (3, "Start these three")]
)
def test_the_headline_counts_the_proposals(number, words):
    keep = RESULTS["rank"].isna() | (RESULTS["rank"].fillna(99) <= number)
    data = only(DATA, keep)
    assert page_first.context(data, rows_of(data), N)["headline"].startswith(words)


def test_an_issue_without_any_characteristic_can_be_read():
    empty = only(DATA, RESULTS["rank"].notna() & False)
    files = dict(pages.render(empty))
    assert "Nothing to re-centre this week" in files["index.html"].decode()
    assert "Nothing to decide on centering" in files["meeting.html"].decode()
    assert not [name for name in files if name.startswith("c/")]


def test_what_is_new_and_what_has_left_the_list_is_told_with_its_reason(first):
    news = first["news"]
    assert not news["first_time"]
    assert {item["name"] for item in news["left"]} == {"S01 fits", "gone an example"}
    why = {item["name"]: (item["why"], item["page"]) for item in news["left"]}
    assert why["S01 fits"] == ("target reached", page_names.page("S01 fits"))
    assert why["gone an example"] == ("no longer registered", None)


def test_alarms_name_what_is_critical_failed_refused_suspect_and_silent():
    told = [alarm["text"] for alarm in page_alarms.alarms(DATA, ROWS, N)]
    beginnings = ("1 critical characteristic is below", "Source “line database” failed", "1 file refused whole",
                  "1 characteristic lies wholly outside", "1 characteristic has sent nothing")  # fmt: skip
    assert len(told) == len(beginnings)
    for text, beginning in zip(told, beginnings, strict=True):
        assert text.startswith(beginning), text


def test_an_alarm_names_three_and_links_to_the_rest():
    five = [{**BY_NAME["N02 silent"], "characteristic": f"Q{i}", "page": f"q{i}.html"} for i in range(5)]
    (alarm,) = [alarm for alarm in page_alarms.alarms(DATA, five, N) if "sent nothing" in alarm["text"]]
    assert alarm["text"].startswith("5 characteristics have")
    assert [item["name"] for item in alarm["items"]] == ["Q0", "Q1", "Q2"] and alarm["more"] == "2"
    assert alarm["href"] == "list.html#alarm=silent"
    assert page_list.columns([{**BY_NAME["N02 silent"], "page": "x"}], N)["alarm"] == ["silent"]


def test_a_critical_characteristic_without_a_verdict_is_an_alarm_too():
    open_ = [{**BY_NAME["N03 too few"], "class": "safety"}]
    assert page_alarms.alarms(DATA, open_, N)[0]["text"] == "1 critical characteristic could not be judged."


def test_a_source_whose_newest_value_is_old_is_called_stale():
    as_of = pd.Timestamp(DATA.run["as_of"])
    old = replace(DATA, loads=DATA.loads.assign(last_taken=as_of - pd.Timedelta(days=12)))
    assert any("is stale" in alarm["text"] and "12 days" in alarm["text"] for alarm in page_alarms.alarms(old, ROWS, N))
    fresh = replace(DATA, loads=DATA.loads.assign(last_taken=as_of - pd.Timedelta(days=6)))
    assert not any("stale" in alarm["text"] for alarm in page_alarms.alarms(fresh, ROWS, N))


def test_a_pull_with_too_many_rows_set_aside_is_an_alarm():
    many = DATA.pulls.assign(rows_rejected=[2000 if s == "gauge room" else 0 for s in DATA.pulls["source"]])
    told = [alarm["text"] for alarm in page_alarms.alarms(replace(DATA, pulls=many), ROWS, N)]
    assert any(text.startswith("Source “gauge room”: 16\u202f%") for text in told)


def test_the_data_are_described_even_when_nothing_is_wrong():
    quiet = replace(DATA, pulls=DATA.pulls[DATA.pulls["status"] == "done"], refused=DATA.refused.iloc[:0],
                    unregistered=DATA.unregistered.iloc[:0])  # fmt: skip
    rows = [BY_NAME["S01 fits"]]
    assert page_alarms.alarms(quiet, rows, N) == []
    facts = [fact["text"] for fact in page_alarms.data_facts(quiet, rows, N)]
    assert facts == [
        "1 of 1 source delivered, the newest value of 2026-11-30",
        "40 of 12\u202f350 rows set aside (0.32\u202f%)",
        "0 characteristics not judged",
    ]


def test_text_of_an_alarm_cannot_turn_the_direction_of_the_line():
    pulls = DATA.pulls.assign(message="\u202elive\u0007", status="failed")
    assert all(
        not re.search("[\u202e\u0007]", a["text"]) for a in page_alarms.alarms(replace(DATA, pulls=pulls), ROWS, N)
    )


def test_list_and_plain_list_hold_every_characteristic_once_with_the_same_words():
    columns, plain = page_list.columns(ROWS, N), page_list.plain(ROWS, N)
    assert columns["name"] == [row["name"] for row in plain] == RESULTS["characteristic"].tolist()
    assert columns["indexText"] == [row["index"] for row in plain]
    assert {len(values) for values in columns.values()} == {len(RESULTS)}


def test_filters_offer_what_occurs_and_nothing_else():
    filters = {
        part["key"]: [choice["value"] for choice in part["choices"]] for part in page_list.context(ROWS)["filters"]
    }
    assert filters["site"] == ["Harbour", "Mill"] and filters["class"] == ["critical"]
    assert filters["cell"] == sorted(RESULTS["cell"].unique()) and filters["alarm"] == ["critical", "silent", "suspect"]


@pytest.mark.parametrize(
    "name", ["R1 bore", "S09 spread too wide", "U0 step", "N01 no data", "N07 no limits", "S11 upper limit only"]
)
def test_a_page_answers_the_questions_in_words_numbers_and_pictures(name):
    row = BY_NAME[name]
    evidence = {r["characteristic"]: r for r in DATA.evidence.to_dict("records")}.get(name)
    told = page_characteristic.context(row, evidence, None, N)
    assert told["stability_answer"] and told["capability_answer"] and told["centering_answer"] and told["next"]
    assert ("control" in told["pictures"]) == (row["stability"] != "not judged")
    assert ("histogram" in told["pictures"]) == (row["measurements"] > 0)
    assert set(told["pictures"]) <= set(told["drawings"])
    assert bool(told["believe"]) == bool(told["answers"]) == (row["centering"] in ("reaches", "may reach"))


def test_pages_follow_each_other_by_rank_and_then_by_name():
    near = page_characteristic.neighbours(ROWS)
    ranked = RESULTS[RESULTS["rank"].notna()].sort_values("rank")["characteristic"].tolist()
    rest = RESULTS[RESULTS["rank"].isna()]["characteristic"].tolist()
    walked, here = [], ranked[0]
    assert near[here]["before"] is None
    while here:
        walked.append(here)
        after = near[here]["after"]
        here = after["name"] if after else None
    assert walked == ranked + rest


def test_a_history_of_one_judgement_is_no_picture():
    row, past = BY_NAME["S01 fits"], DATA.history[DATA.history["characteristic"] == "S01 fits"]
    assert "history" in page_characteristic.context(row, None, past, N)["pictures"]
    assert "history" not in page_characteristic.context(row, None, past.iloc[-1:], N)["pictures"]


def test_the_meeting_sheet_holds_decisions_evidence_and_answers():
    told = page_meeting.context(DATA, ROWS, N)
    assert len(told["cards"]) == 3 and told["waiting"] == "5 further characteristics"
    for card in told["cards"]:
        assert len(card["answers"]) == 6 and "<svg" in card["control"] and "<svg" in card["histogram"]
    html = issue.files()["meeting.html"].decode()
    assert html.count("☐ yes") == html.count('<section class="evidence">') == 3
    ids = re.findall(r'\sid="([^"]+)"', html)
    assert len(ids) == len(set(ids)), "several pictures on one page must not share an id"


def test_sites_name_their_characteristics_with_links_and_bounds():
    from portfolio import sites

    told = page_others.sites(sites.compare(RESULTS), N)
    assert [row["site"] for row in told["sites"]] == ["Harbour", "Mill"]
    (family,) = told["families"]
    assert [row["page"] for row in family["rows"]] == [page_names.page(row["name"]) for row in family["rows"]]
    assert all(" to " in row["bounds"] for row in family["rows"])


def test_the_data_page_accounts_for_every_row():
    told = page_others.quality(DATA, ROWS, N)
    (source,) = told["sources"]
    assert source["read"] == "12\u202f350" and source["rejected"] == "40 (0.32\u202f%)"
    assert [entry["source"] for entry in told["never"]] == ["line database"]
    assert sum(int(reason["rows"]) for reason in told["reasons"]) == 30
    assert len(told["unjudged"]) == (RESULTS["cell"] == "not judged").sum()
    assert [entry["number"] for entry in told["unregistered"]] == ["1"]


def test_a_logged_change_stands_between_the_index_before_and_after():
    name = next(name for name in DATA.changes["characteristic"] if name != "long gone")
    past = DATA.history[DATA.history["characteristic"] == name].sort_values("as_of")
    when = past["as_of"].iloc[2]
    changes = DATA.changes.assign(changed_at=when)
    told = {change["name"]: change for change in page_others.changes(replace(DATA, changes=changes), ROWS, N)["logged"]}
    assert told[name]["before"].startswith(f"{past['index'].iloc[2]:.2f} (")
    assert told["long gone"]["since"] == "no longer registered" and told["long gone"]["page"] is None
    first_ever = DATA.changes.assign(changed_at=past["as_of"].iloc[0] - pd.Timedelta(1, "D"))
    assert all(c["before"] == "" for c in page_others.changes(replace(DATA, changes=first_ever), ROWS, N)["logged"])


def test_methods_name_the_settings_of_the_plan():
    plan = page_data(judgement={"false_discovery": 0.1}, portfolio={"window_weeks": 26}).plan
    told = page_others.methods(plan, N)
    assert told["false_discovery"] == "10\u202f%" and told["weeks"] == "26"


def test_a_long_title_is_cut_and_a_long_name_is_not():
    html = issue.files()[f"c/{page_names.page(LONG)}"].decode()
    title = re.search("<title>(.*?)</title>", html)[1]
    assert len(title) < 160 and LONG in unescape(html)


def test_json_cannot_leave_its_script_element():
    nasty = {"name": "</script><!--\u2028&", "x": 1.5}
    text = pages.safe_json(nasty)
    assert not re.search("[<>&\u2028]", text) and json.loads(text) == nasty
    with pytest.raises(ValueError, match="JSON"):
        pages.safe_json({"x": float("nan")})


def test_an_unknown_name_in_a_template_is_an_error_and_text_is_escaped():
    made = pages.environment().from_string("{{ name }}")
    assert made.render(name="<b>") == "&lt;b&gt;"
    with pytest.raises(Exception, match="is undefined"):
        made.render()


def test_templates_decide_nothing_and_calculate_nothing():
    """Layout only: no arithmetic, no comparison of numbers, no rounding inside the templates."""
    for name in (
        "base",
        "index",
        "list",
        "plain",
        "characteristic",
        "quality",
        "sites",
        "changes",
        "methods",
        "meeting",
        "parts",
    ):
        source = pages.shipped.text(f"reports/templates/{name}.html")
        for code in re.findall(r"\{\{(.*?)\}\}|\{%(.*?)%\}", source, re.S):
            bare = re.sub(r"\"[^\"]*\"", "", "".join(code))
            assert not re.search(r"round|format|[*/+]|[<>]=?", bare), (name, code)


def test_every_page_names_control_and_specification_limits_in_full():
    for path in issue.html_paths():
        if path.startswith("c/"):
            continue
        text = text_of(issue.files()[path].decode())
        assert not re.search(r"\b(upper|lower) (control|specification) line|\bspec\b|\bUCL\b|\bLCL\b", text), path


def test_an_issue_rendered_again_from_the_store_is_the_same_byte_for_byte(tmp_path):
    path = tmp_path / "weekly.duckdb"
    run = int(DATA.run["run_id"])
    with Store.open(path) as store:
        store.insert("runs", pd.DataFrame([DATA.run]).convert_dtypes())
        store.insert("results", DATA.results.assign(run_id=run))
        store.insert("evidence", DATA.evidence.assign(run_id=run))
        store.insert("ranking", DATA.ranking.assign(run_id=run))
        store.insert("pulls", DATA.pulls.assign(pull_id=1))
        store.insert("changes", DATA.changes)
    issues = []
    for _ in range(2):
        with Store.open(path, read_only=True) as store:
            issues.append(dict(pages.render(pages.collect(store, run, DATA.plan))))
    assert issues[0] == issues[1]
    direct = dict(pages.render(DATA))
    same = [name for name in issues[0] if name.startswith(("assets/", "plain", "list", "meth", "data/judgement"))]
    assert len(same) >= 9
    assert [name for name in same if issues[0][name] != direct[name]] == []
