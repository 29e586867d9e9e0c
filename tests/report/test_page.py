"""The page stands alone, can be read by everyone, and says what it must."""

from __future__ import annotations

import re
from dataclasses import replace
from html.parser import HTMLParser
from importlib.resources import files
from itertools import pairwise

import pytest

from treering.report import build_files, render_index
from treering.report.wording import FOOTER, INVENTED
from treering.terms import CAUTION

MAIN = "failed-first-attempt"


class Page(HTMLParser):
    """What a test asks of a page: tags with attributes in order, ids, text."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.words: list[str] = []
        self._skip = 0
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))
        self._skip += tag == "style"

    def handle_endtag(self, tag):
        self._skip -= tag == "style"

    def handle_data(self, data):
        if not self._skip:
            self.words.append(data)

    @property
    def text(self) -> str:
        return re.sub(r"\s+", " ", " ".join(self.words))


@pytest.fixture(scope="module")
def built(views):
    return {version: build_files(view) for version, view in views.items()}


@pytest.fixture(scope="module")
def html(built):
    return {version: files_["index.html"].decode() for version, files_ in built.items()}


@pytest.fixture(scope="module")
def pages(html):
    return {version: Page(text) for version, text in html.items()}


def test_the_page_needs_nothing_from_outside(html):
    for text in html.values():
        bare = text.replace('xmlns="http://www.w3.org/2000/svg"', "").replace(
            'xmlns:xlink="http://www.w3.org/1999/xlink"', ""
        )
        assert not re.search(r"https?://|<script|<link|@import|<iframe|\ssrc=|url\((?!#)", bare)


def test_every_id_is_unique_and_every_inner_link_leads_somewhere(pages):
    for page in pages.values():
        ids = [a["id"] for _, a in page.tags if "id" in a]
        assert len(ids) == len(set(ids))
        for tag, attributes in page.tags:
            target = attributes.get("href", "") or ""
            if tag == "a" and target.startswith("#"):
                assert target[1:] in ids


def test_the_files_the_page_names_are_there(built, pages):
    for version, page in pages.items():
        linked = {a["href"] for tag, a in page.tags if tag == "a" and not a["href"].startswith(("#", "../"))}
        assert linked == {"report.json", "trials.csv", "syntheses.csv", "looks.csv", "changes.csv"}
        assert linked <= set(built[version])


def test_headings_go_down_one_step_at_a_time_from_a_single_first_one(pages):
    for page in pages.values():
        levels = [int(tag[1]) for tag, _ in page.tags if re.fullmatch(r"h[1-6]", tag)]
        assert levels.count(1) == 1
        assert levels[0] == 1
        assert all(b - a <= 1 for a, b in pairwise(levels))


def test_tables_have_captions_and_headed_columns_and_the_page_a_language(pages):
    for page in pages.values():
        names = [tag for tag, _ in page.tags]
        assert ("html", {"lang": "en"}) in page.tags
        assert names.count("table") == names.count("caption")
        assert all("scope" in a for tag, a in page.tags if tag == "th")
        assert names.count("figure") == names.count("figcaption")


def test_figures_in_the_page_are_the_files(built, html):
    for version, named in built.items():
        drawn = [content.decode() for name, content in named.items() if name.startswith("figures/")]
        assert drawn
        assert all(svg in html[version] for svg in drawn)


def test_what_changed_comes_first_and_the_audit_last(html):
    for text in html.values():
        order = ["changed", f"o-{MAIN}", "process", "certainty", "standards", "audit"]
        places = [text.index(f'<section id="{i}"') if i[0] != "o" else text.index(f'id="{i}"') for i in order]
        assert places == sorted(places)


def test_the_ordinary_estimate_stands_before_anything_about_monitoring(html):
    section = html[3][html[3].index(f'id="o-{MAIN}"') :]
    order = [
        *("Risk ratio", "per 1000", "Forest figure", "Crossing no longer supported"),
        *("Monitoring on the effect", "Monitoring on the Z", "All inputs", "Ledger of looks"),
        *("Hindsight", "Second opinions", "How robust"),
    ]
    places = [section.index(words) for words in order]
    assert places == sorted(places)


def test_the_caution_stands_beside_each_monitoring_result(views, html):
    monitored = sum(bool(body["monitoring"]) for body in views[3].analyses.values())
    # In the summary, and per outcome beside the verdict and in both captions.
    assert html[3].count(CAUTION) == 1 + 3 * monitored


def test_the_first_page_tells_trial_cause_and_reason_of_each_change(pages):
    text = pages[3].text
    assert (
        "Fern 2031: left the main analysis: report retracted on 2031-05-02 (retraction: retracted by the"
        in text
    )
    assert "Cedar and others 2030: comparator events 12 became 14 (correction: erratum of 2031-04-20)" in text
    assert "Movement of the pooled risk ratio, split by cause" in text


def test_a_verdict_that_turned_names_the_one_before(pages):
    assert "crossing no longer supported (last version: benefit boundary crossed)" in pages[3].text


def test_what_a_crossing_rests_on_is_told_by_the_names_of_the_trials(pages, views):
    (only,) = views[2].analyses[MAIN]["monitoring"]["rests_on"]["sets"][:1]
    label = {row["trial"]: row["label"] for row in views[2].analyses[MAIN]["trials"]}[only[0]]
    part = pages[2].text.split("What the crossing rests on")[1]
    assert label in part[:400]


def test_waiting_items_waivers_and_trials_left_out_are_told_with_their_reasons(pages):
    text = pages[3].text
    for words in (
        "the two extractions differ in 2 fields",
        "second extractor on leave",
        "no event in either arm",
        "retracted by the journal",
    ):
        assert words in text


def test_a_rating_on_older_numbers_is_flagged_beside_the_estimate(pages):
    assert "Rated on older numbers: it was rated 232 days ago" in pages[3].text
    assert "nobody has rated this outcome" in pages[3].text


def test_the_audit_facts_are_on_the_page(pages, views):
    for version, page in pages.items():
        for fact in (
            "ab" * 32,
            views[version].version["protocol_digest"],
            "treering audit",
            "treering replay",
        ):
            assert fact in page.text


def test_an_invented_review_says_so_on_every_page_and_a_real_one_does_not(views, built):
    index = render_index(views[3].protocol, [], "living").decode()
    assert INVENTED in index
    assert all(named["index.html"].decode().count(INVENTED) == 2 for named in built.values())
    real = views[1].protocol.model_copy(
        update={"review": views[1].protocol.review.model_copy(update={"invented": False})}
    )
    assert INVENTED not in build_files(replace(views[1], protocol=real))["index.html"].decode()
    assert INVENTED not in render_index(real, [], "living").decode()


def test_every_page_defers_to_clinicians(views, html):
    assert all(FOOTER in text for text in [*html.values(), render_index(views[1].protocol, [], "x").decode()])


def test_a_change_without_a_cause_is_shouted(views):
    changes = {
        **views[3].changes,
        MAIN: {**views[3].changes[MAIN], "uncaused": [{"what": "trial x", "detail": "y"}]},
    }
    text = build_files(replace(views[3], changes=changes))["index.html"].decode()
    assert 'role="alert"' in text
    assert "must not be signed" in text


def test_hostile_text_is_escaped(views):
    waiting = [{"trial": "<img src=x>", "outcome": MAIN, "why": "<b>&"}]
    records = {**views[1].records, "waiting": waiting}
    text = build_files(replace(views[1], records=records))["index.html"].decode()
    assert "<img" not in text
    assert "&lt;img src=x&gt;" in text


def test_an_outcome_without_any_trial_says_that_nothing_is_estimated(views):
    nothing = {"pooled": None, "common": None, "absolute": None, "monitoring": None}
    body = {**views[1].analyses["pain"], "trials": [], "k": 0, "participants": 0, "warnings": [], **nothing}
    view = replace(views[1], analyses={"pain": body}, changes={})
    named = build_files(view)
    assert not any(name.startswith("figures/") for name in named)
    assert "No trial gives a usable result for this outcome yet" in named["index.html"].decode()


def test_the_index_lists_the_newest_version_first_and_links_to_each(views):
    rows = [
        {**v.version, "analyses": v.analyses, "folder": f"{v.version['date']}-v00{n}"}
        for n, v in views.items()
    ]
    page = Page(render_index(views[3].protocol, rows, {"date": "2031-05-17", "waiting": 0}).decode())
    links = [a["href"] for tag, a in page.tags if tag == "a" and not a["href"].startswith("#")]
    assert links == [f"{row['folder']}/index.html" for row in reversed(rows)]
    assert "Status: living, last run 2031-05-17" in page.text
    assert CAUTION in page.text


@pytest.mark.parametrize("mode", ["light", "dark"])
def test_text_colours_have_enough_contrast(mode):
    # WCAG 2.1, success criterion 1.4.3: at least 4.5 to 1; relative luminance as defined there.
    css = files("treering.report").joinpath("templates/style.css").read_text()
    block = css.split(":root {")[2 if mode == "dark" else 1].split("}")[0]
    colours = dict(re.findall(r"--(\w+): (#[0-9a-f]{6})", block))
    for ground in ("paper", "note"):
        for text in ("ink", "muted", "accent"):
            light, dark = sorted((_luminance(colours[text]), _luminance(colours[ground])), reverse=True)
            assert (light + 0.05) / (dark + 0.05) >= 4.5, (mode, text, ground)


def _luminance(colour):
    channels = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.03928 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return sum(w * c for w, c in zip((0.2126, 0.7152, 0.0722), linear, strict=True))


def test_a_kept_simulation_stands_beside_the_boundary_and_says_when_it_is_of_another_plan(views):
    digest = views[3].analyses[MAIN]["monitoring"]["look"]["plan_digest"]
    found = {"alarm": 0.0558, "alarm_error": 0.0023, "information": 84.6, "lost": None}
    row = {"rule": "the plan", "tau2": 0.1, "effect": 0.0, **found}
    head = {"sentence": "Simulated false alarms of the plan.", "reviews": 10000, "seed": 7, "required": 169.2}
    kept = {**head, "rows": [row], "plan_digest": digest}
    text = Page(build_files(replace(views[3], simulation={MAIN: kept}))["index.html"].decode()).text
    assert "5.6% ± 0.23%" in text
    assert "50%" in text.split("Simulated false alarms")[1][:700]
    assert "Simulated for another plan" not in text
    other = {MAIN: {**kept, "plan_digest": "another"}}
    assert (
        "Simulated for another plan"
        in build_files(replace(views[3], simulation=other))["index.html"].decode()
    )


def test_an_outcome_without_a_simulation_says_how_to_make_one(html):
    assert "No simulation of this plan is kept" in html[3]


def test_risk_of_bias_is_told_by_domain_in_words(pages):
    part = pages[3].text.split("Risk of bias of each result by domain")[1]
    assert (
        "Alder 2029 Low Some concerns Low Low Low Some concerns MV, OK Support: deviations: the carers knew"
        in part
    )
