"""The page is whole, self-contained, well built and the same for the same result."""

import math
import re
from dataclasses import replace
from html.parser import HTMLParser
from itertools import pairwise

import pytest

from mtest.report.page import CONTENTS, render_page

VOID = {"meta", "link", "br", "hr", "img", "input"}


class Outline(HTMLParser):
    """Headings, ids, references and the balance of tags."""

    def __init__(self, page):
        super().__init__()
        self.headings, self.ids, self.references, self.open, self.faults = [], [], [], [], []
        self.tags = []
        self.feed(page)

    def handle_starttag(self, tag, attributes):
        attributes = dict(attributes)
        self.tags.append((tag, attributes))
        if re.fullmatch("h[1-6]", tag):
            self.headings.append(int(tag[1]))
        if "id" in attributes:
            self.ids.append(attributes["id"])
        for name in ("href", "src", "xlink:href"):
            if name in attributes:
                self.references.append(attributes[name])
        self.references += [
            f"#{key}" for value in attributes.values() for key in re.findall(r"url\(#(.+?)\)", value or "")
        ]
        for name in ("aria-labelledby",):
            if name in attributes:
                self.references.append("#" + attributes[name])
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attributes):
        self.handle_starttag(tag, attributes)
        if tag not in VOID:
            self.handle_endtag(tag)

    def handle_endtag(self, tag):
        if not self.open or self.open.pop() != tag:
            self.faults.append(tag)


@pytest.fixture(scope="module")
def four_arms_page(four_arms):
    return render_page(four_arms)


@pytest.fixture(scope="module")
def crowded_page(crowded):
    return render_page(crowded)


@pytest.fixture(scope="module")
def two_families_page(two_families):
    return render_page(two_families)


@pytest.fixture(scope="module", params=["four_arms_page", "two_families_page", "crowded_page"])
def page(request):
    return request.getfixturevalue(request.param)


def test_tags_are_balanced(page):
    outline = Outline(page)
    assert outline.faults == []
    assert outline.open == []


def test_there_is_one_h1_and_no_heading_level_is_skipped(page):
    headings = Outline(page).headings
    assert headings.count(1) == 1
    assert headings[0] == 1
    assert all(after - before <= 1 for before, after in pairwise(headings))


def test_ids_are_unique_and_every_inner_reference_leads_somewhere(page):
    outline = Outline(page)
    assert len(outline.ids) == len(set(outline.ids))
    inner = {reference[1:] for reference in outline.references if reference.startswith("#")}
    assert len(inner) > 20
    assert inner <= set(outline.ids)


def test_nothing_is_fetched(page):
    outline = Outline(page)
    assert {reference[:5] for reference in outline.references if not reference.startswith("#")} <= {"data:"}
    assert not re.search(r"@import|url\((?!#)", page)


def test_sections_come_in_the_agreed_order(page):
    places = [page.index(f'<section id="{key}"') for key, _ in CONTENTS]
    assert places == sorted(places)


def test_every_table_has_a_caption_and_scoped_heads(page):
    outline = Outline(page)
    tags = [tag for tag, _ in outline.tags]
    assert tags.count("table") == tags.count("caption") > 0
    assert all(attributes.get("scope") in ("col", "row") for tag, attributes in outline.tags if tag == "th")


def test_every_picture_is_named(page):
    pictures = [attributes for tag, attributes in Outline(page).tags if tag == "svg"]
    assert len(pictures) > 10
    assert all(attributes["role"] == "img" and len(attributes["aria-label"]) > 20 for attributes in pictures)


def test_a_p_value_is_never_printed_as_zero_or_one(page):
    cells = re.findall(r"<td[^>]*>([^<]*)", page)
    assert len(cells) > 300
    assert not [cell for cell in cells if re.fullmatch(r"\W*(0\.000|1\.000)\W*", cell)]


def test_the_same_result_gives_the_same_page_whenever_it_was_run(four_arms, four_arms_page):
    later = replace(four_arms, run=replace(four_arms.run, finished_utc="2031-01-01T00:00:00Z"))
    assert four_arms_page == render_page(later)


def test_the_control_statement_stands_word_for_word_in_the_answer(four_arms):
    words = "Weak control & nothing <else>, as 'stated'."
    family = replace(four_arms.families[0], control=words)
    page = render_page(replace(four_arms, families=(family,)))
    answer = page[page.index('<section id="answer"') : page.index('<section id="results"')]
    assert "Weak control &amp; nothing &lt;else&gt;, as &#39;stated&#39;." in answer


def test_what_is_not_settled_and_what_warns_is_said_in_the_answer(two_families):
    page = render_page(two_families)
    answer = page[page.index('<section id="answer"') : page.index('<section id="results"')]
    assert "Not settled by the draws made" in answer
    assert "31 % of the draws are tied" in answer
    assert "the planned arm was used" in answer


def test_text_from_the_plan_is_escaped(two_families):
    page = render_page(two_families)
    assert "<script>alert" not in page
    assert "&lt;script&gt;alert" in page
    assert "main &lt;b&gt;&amp; first&lt;/b&gt;" in page


def test_a_dollar_sign_in_a_name_stays_a_dollar_sign(four_arms):
    family = four_arms.families[0]
    named = replace(
        family, hypotheses=tuple(replace(h, endpoint=f"Cost, $1 to $2, {h.endpoint}") for h in family.hypotheses)
    )
    assert "Cost, $1 to $2, Days off work" in render_page(replace(four_arms, families=(named,)))


def test_infinite_and_missing_numbers_are_shown_as_such(two_families):
    page = render_page(two_families)
    assert 'data-sort="-Infinity"' in page
    assert "−∞" in page
    assert 'title="not estimable"' in page
    assert not re.search(r">\s*-?(nan|inf)\s*<", page, re.IGNORECASE)


def test_a_family_without_null_or_correlation_says_why(two_families):
    page = render_page(two_families)
    assert "has no single distribution of the" in page
    assert "Not offered for this family" in page


def test_a_family_of_one_hypothesis_without_any_number_still_renders(four_arms):
    family = four_arms.families[0]
    h = family.hypotheses[0]
    names = ("estimate", "se", "low", "high")
    lost = replace(
        h,
        effect=replace(h.effect, **dict.fromkeys(names, math.nan)),
        statistic_value=math.nan,
        p_model=math.nan,
        p_unadjusted=math.nan,
        p_adjusted=math.nan,
        group="",
    )
    bare = replace(family, hypotheses=(lost,), null=None, correlation=None)
    page = render_page(replace(four_arms, families=(bare,)))
    assert "No p-value to draw." in page


def test_groups_are_spoken_of_only_where_there_are_some(four_arms_page, crowded_page):
    for words in ("White lines part the groups", "<h4"):
        assert words in four_arms_page
        assert words not in crowded_page
    assert "Other endpoints" not in crowded_page


def test_endpoints_without_a_group_are_set_apart_from_those_with_one(four_arms):
    family = four_arms.families[0]
    mixed = tuple(replace(h, group="" if h.group == "Tolerability" else h.group) for h in family.hypotheses)
    page = render_page(replace(four_arms, families=(replace(family, hypotheses=mixed),)))
    assert page.count(">Other endpoints</h4>") == 1


def test_a_caption_that_says_what_the_heading_says_is_for_screen_readers_only(page):
    spoken = re.findall(r'<caption [^>]*class="spoken">([^<,]*)', page)
    shown = re.findall(r'<caption id="[^"]*">([^<,]*)', page)
    assert set(spoken) == {"Results"}
    assert "Summaries and test statistics" in shown


def test_few_hypotheses_are_named_one_by_one_in_the_picture_of_correlations(crowded, crowded_page):
    page = crowded_page
    picture = page[page.index('<section id="correlation"') : page.index('<section id="accounting"')]
    names = re.findall(r">([^<>]+), neck gel 4 %, three times daily</text>", picture)
    assert names == [h.endpoint for h in crowded.families[0].hypotheses]


def test_many_hypotheses_are_named_by_endpoint_and_the_order_of_their_arms_is_told(four_arms_page):
    page = four_arms_page
    picture = page[page.index('<section id="correlation"') : page.index('<section id="accounting"')]
    assert ">Pain at rest, change to week 12</text>" in picture
    assert "from top to bottom: 1 % vs vehicle; 2 % vs vehicle; 4 % vs vehicle." in picture


def test_both_ways_to_the_same_digits_are_named(page):
    reproduction = page[page.index('<section id="reproduction"') :]
    assert "mtest run plan.toml" in reproduction
    assert "mtest replay BUNDLE" in reproduction


def test_a_screen_of_hundreds_of_endpoints_stays_readable(four_arms):
    """Beyond fixed numbers only the smallest p are drawn, and the page says how many are left out."""
    import numpy as np

    family = four_arms.families[0]
    many = tuple(replace(h, endpoint=f"{h.endpoint} {copy}") for copy in range(10) for h in family.hypotheses)
    wide = replace(family, hypotheses=many, correlation=np.kron(np.eye(10), family.correlation))
    page = render_page(replace(four_arms, families=(wide,)))
    assert "92 endpoints with larger adjusted p are not drawn" in page
    assert "The 60 smallest of 420 are drawn." in page
    assert "How often each correlation" in page
    assert len(page) < 3_000_000
