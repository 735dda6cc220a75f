"""The report in a real browser: quiet, offline, sortable, drawn, and no wider than the screen."""

import json

import pytest
from selenium.webdriver.common.by import By
from selenium.webdriver.common.keys import Keys

COLUMN = """
const table = document.querySelector("table[data-sortable]");
const name = (head) => head.querySelector(".head").innerText.replace("\\u00a0", " ");
const heads = Array.from(table.tHead.rows[0].cells, name);
const place = heads.indexOf(arguments[0]);
return Array.from(table.tBodies[0].rows, (row) => row.cells[place].dataset.sort);
"""


def _head(driver, name):
    """The head of a column of the first results table, and its button."""
    for head in driver.find_elements(By.CSS_SELECTOR, "table[data-sortable] thead th"):
        if head.find_element(By.CSS_SELECTOR, ".head").text == name:
            return head, head.find_element(By.TAG_NAME, "button")
    raise AssertionError(f"no column {name!r}")


def _numbers(driver, name):
    return [float(value) for value in driver.execute_script(COLUMN, name)]


def test_the_console_stays_silent(opened):
    assert opened.get_log("browser") == []


def test_the_console_log_would_show_an_error(opened):
    """The test above can fail."""
    opened.execute_script("setTimeout(() => { throw new Error('on purpose') }, 0)")
    opened.execute_async_script("setTimeout(arguments[0], 50)")
    assert any("on purpose" in entry["message"] for entry in opened.get_log("browser"))


def test_nothing_but_the_file_itself_is_requested(opened, report):
    messages = [json.loads(entry["message"])["message"] for entry in opened.get_log("performance")]
    asked = [m["params"]["request"]["url"] for m in messages if m["method"] == "Network.requestWillBeSent"]
    assert report.as_uri() in asked
    assert [url for url in asked if url != report.as_uri() and not url.startswith("data:")] == []
    assert opened.execute_script("return performance.getEntriesByType('resource').length") == 0


def test_the_page_may_not_send_anything_out(opened):
    """Its own policy refuses a request that a script tries to make."""
    outcome = opened.execute_async_script(
        "const done = arguments[0]; fetch('http://127.0.0.1:9/').then(() => done('sent'), () => done('refused'));"
    )
    assert outcome == "refused"
    assert any("Content Security Policy" in entry["message"] for entry in opened.get_log("browser"))


def test_a_click_sorts_by_the_unrounded_value_and_a_second_one_turns_the_order(opened):
    before = _numbers(opened, "p, adjusted")
    head, button = _head(opened, "p, adjusted")
    button.click()
    assert head.get_attribute("aria-sort") == "ascending"
    assert _numbers(opened, "p, adjusted") == sorted(before)
    button.click()
    assert head.get_attribute("aria-sort") == "descending"
    assert _numbers(opened, "p, adjusted") == sorted(before, reverse=True)
    assert "p, adjusted, descending" in opened.find_element(By.ID, "sort-status").get_attribute("textContent")


def test_only_one_column_says_it_is_sorted(opened):
    for name in ("p, adjusted", "Estimate"):
        _head(opened, name)[1].click()
    sorted_heads = opened.find_elements(By.CSS_SELECTOR, "th[aria-sort]")
    assert [head.find_element(By.CSS_SELECTOR, ".head").text for head in sorted_heads] == ["Estimate"]


def test_text_columns_sort_by_the_alphabet(opened):
    _head(opened, "Endpoint")[1].click()
    names = opened.execute_script(COLUMN, "Endpoint")
    assert names == sorted(names, key=str.casefold)


@pytest.mark.parametrize("key", [Keys.ENTER, Keys.SPACE])
def test_the_keyboard_sorts_as_a_click_does(opened, key):
    before = _numbers(opened, "Step")
    head, button = _head(opened, "Step")
    opened.execute_script("arguments[0].focus()", button)
    opened.switch_to.active_element.send_keys(key)
    assert head.get_attribute("aria-sort") == "ascending"
    assert _numbers(opened, "Step") == sorted(before)


def test_the_first_tab_stop_skips_to_the_answer_and_shows_itself(opened):
    opened.find_element(By.TAG_NAME, "body").send_keys(Keys.TAB)
    link = opened.switch_to.active_element
    assert link.get_attribute("class") == "skip"
    assert link.rect["x"] >= 0
    assert opened.execute_script("return getComputedStyle(arguments[0]).outlineStyle", link) == "solid"


@pytest.mark.parametrize("report", ["two_families"], indirect=True)
def test_what_cannot_be_estimated_sorts_last_both_ways(opened):
    opened.execute_script(
        "const t = document.querySelectorAll('table[data-sortable]'); for (let i = 0; i < 2; i++) t[i].remove();"
    )
    for direction in ("ascending", "descending"):
        head, button = _head(opened, "95 % interval")
        button.click()
        assert head.get_attribute("aria-sort") == direction
        assert opened.execute_script(COLUMN, "95 % interval") == ["-Infinity", ""]


def test_every_picture_is_drawn(opened):
    boxes = opened.execute_script(
        "return Array.from(document.querySelectorAll('figure svg'), (svg) => {"
        "const outer = svg.getBoundingClientRect(), inner = svg.getBBox();"
        "return [outer.width, outer.height, inner.width, inner.height]; })"
    )
    assert len(boxes) >= 17
    assert all(side > 20 for box in boxes for side in box)


@pytest.mark.parametrize("width", [390, 768, 1280])
def test_the_page_never_scrolls_sideways(opened, set_width, width):
    set_width(opened, width)
    seen = opened.execute_script(
        "const root = document.documentElement; return [window.innerWidth, root.scrollWidth - root.clientWidth];"
    )
    assert seen == [width, 0]


def test_wide_tables_scroll_inside_their_own_box_on_a_telephone(opened, set_width):
    set_width(opened, 390)
    over = opened.execute_script(
        "const box = document.querySelector('#results .scroll');"
        "return [box.scrollWidth, box.clientWidth, box.tabIndex];"
    )
    assert over[0] > over[1]
    assert over[1] <= 390
    assert over[2] == 0


def test_text_of_pictures_stays_legible_on_a_telephone(opened, set_width):
    """No picture is shrunk so far that its type falls below 8 pixels."""
    set_width(opened, 390)
    sizes = opened.execute_script(
        "return Array.from(document.querySelectorAll('figure svg'), (svg) => {"
        "const scale = svg.getBoundingClientRect().width / svg.viewBox.baseVal.width;"
        "return Math.min(...Array.from(svg.querySelectorAll('text'),"
        " (text) => parseFloat(getComputedStyle(text).fontSize) * scale)); })"
    )
    assert min(sizes) >= 8


@pytest.mark.parametrize("width", [390, 1280])
def test_no_text_of_a_picture_is_cut_off(opened, set_width, width):
    set_width(opened, width)
    cut = opened.execute_script(
        "return Array.from(document.querySelectorAll('figure svg')).flatMap((svg) => {"
        "const frame = svg.getBoundingClientRect();"
        "return Array.from(svg.querySelectorAll('text')).filter((text) => {"
        "const box = text.getBoundingClientRect();"
        "return box.left < frame.left - 1 || box.right > frame.right + 1"
        " || box.top < frame.top - 2 || box.bottom > frame.bottom + 2; }).map((text) => text.textContent); })"
    )
    assert cut == []
