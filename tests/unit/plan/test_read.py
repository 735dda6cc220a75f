"""Reading a plan: what is accepted, and the sentence for each fault of form."""

from __future__ import annotations

import hashlib
import pickle
import re
import tomllib

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from mtest.errors import PlanError
from mtest.plan.read import parse_plan, read_plan


def faults_of(text: str, name: str = "p.toml") -> tuple[str, ...]:
    with pytest.raises(PlanError, match=re.escape(name)) as caught:
        parse_plan(text, name)
    return caught.value.faults


def test_a_sound_plan_is_read_whole(plan_text):
    plan = parse_plan(plan_text(), "p.toml")
    assert plan.randomisation.arms == ("vehicle", "low", "high")
    assert plan.family[1].comparisons == (("high", "low"), ("high", "vehicle"))
    assert plan.analysis_set[0].where == {"kept": "Y"}


def test_a_value_may_be_a_column_alone(plan_text):
    value = parse_plan(plan_text(), "p.toml").endpoint[1].value
    assert (value.column, value.parameter, value.visit) == ("sleep", "", "")


def test_a_plan_file_keeps_its_text_and_the_hash_of_its_bytes(plan_text, tmp_path):
    path = tmp_path / "p.toml"
    raw = b"\xef\xbb\xbf" + plan_text().replace("\n", "\r\n").encode()
    path.write_bytes(raw)
    read = read_plan(path)
    assert read.sha256 == hashlib.sha256(raw).hexdigest()
    assert read.text.encode() == raw[3:]
    assert read.path == path
    assert read.plan == parse_plan(plan_text(), "p.toml")


def test_whole_numbers_serve_as_numbers_but_true_does_not(plan_text):
    """alpha = true would otherwise pass as 1."""
    (fault,) = faults_of(plan_text(('comparisons = "each', 'alpha = true\ncomparisons = "each')))
    assert fault == 'p.toml: family[1] "All".alpha must be a number; got true. Write a level such as 0.05.'


FORM_FAULTS = {
    "missing section": ("[draws]\nseed = 1\n", "", "the plan must have a section [draws]; got none. Add it."),
    "missing key": (
        "seed = 1",
        "",
        "draws must have the key 'seed'; got none. Add seed = a whole number of your choice.",
    ),
    "missing key with words": (
        'column = "change" }\nbetter = "lower"',
        'column = "change" }',
        'endpoint[1] "Pain" must have the key \'better\'; got none. Add better = "higher" or "lower".',
    ),
    "unknown key": (
        "seed = 1",
        "seed = 1\nat_leest = 1000",
        "unknown key 'at_leest' in draws; the keys known there are at_least, at_most, seed, exact_limit. "
        "Did you mean 'at_least'?",
    ),
    "unknown key unlike any": (
        "seed = 1",
        "seed = 1\nxyz = 1000",
        "unknown key 'xyz' in draws; the keys known there are at_least, at_most, seed, exact_limit. "
        "Remove it, or correct its spelling.",
    ),
    "unknown section": (
        "[[analysis_set]]",
        "[[endpoit]]\nname = 'x'\n[[analysis_set]]",
        "unknown key 'endpoit' at the top level; the keys known there are study, data, randomisation, draws, endpoint, "
        "analysis_set, family. Did you mean 'endpoint'?",
    ),
    "wrong word": (
        'better = "lower"',
        'better = "down"',
        "endpoint[1] \"Pain\".better must be 'higher' or 'lower'; got 'down'. Did you mean 'lower'?",
    ),
    "wrong case": (
        'procedure = "Holm"',
        'procedure = "holm"',
        "or 'none'; got 'holm'. Did you mean 'Holm'?",
    ),
    "scheme": (
        '"stratified"',
        '"stratefied"',
        "randomisation.scheme must be 'complete', 'stratified', 'blocks' or 'matched sets'; got 'stratefied'. "
        "Did you mean 'stratified'?",
    ),
    "not text": (
        'subject = "id"',
        "subject = 7",
        "data.subject must be text in quotation marks; got 7.",
    ),
    "empty text": ('name = "Pain"', 'name = ""', "endpoint[1].name must not be empty; got empty text."),
    "empty column": ('value = "sleep"', 'value = ""', 'endpoint[2] "Sleep".value.column must not be empty; got empty'),
    "not a whole number": ("seed = 1", "seed = 1.5", "draws.seed must be a whole number; got 1.5."),
    "whole number as text": ("seed = 1", 'seed = "1"', "draws.seed must be a whole number; got '1'."),
    "too few draws": ("seed = 1", "seed = 1\nat_least = 9", "draws.at_least must be at least 99; got 9."),
    "negative seed": ("seed = 1", "seed = -1", "draws.seed must be at least 0; got -1."),
    "alpha too large": (
        "[data]",
        "alpha = 5\n[data]",
        "study.alpha must lie between 0 and 1, neither included; got 5.",
    ),
    "alpha zero": ("[data]", "alpha = 0.0\n[data]", "study.alpha must lie between 0 and 1, neither included; got 0.0."),
    "alpha not a number": (
        "[data]",
        "alpha = nan\n[data]",
        "study.alpha must lie between 0 and 1, neither included; got nan.",
    ),
    "one arm": (
        'arms = ["vehicle", "low", "high"]\nreference = "vehicle"',
        'arms = ["vehicle"]',
        "randomisation.arms must hold at least 2 items; got ['vehicle'].",
    ),
    "text for a list": ('strata = ["site"]', 'strata = "site"', "randomisation.strata must be a list; got 'site'."),
    "one table for several": (
        "[[data.long]]",
        "[data.long]",
        "data.long must be a list of tables; got one table. Write [[data.long]] instead of [data.long].",
    ),
    "several tables for one": (
        "[draws]",
        "[[draws]]",
        "draws must be one table; got a list of 1 table. Write [draws] instead of [[draws]], once.",
    ),
    "text for a table": (
        '[study]\ntitle = "A study (invented)"',
        'study = "A study"',
        "study must be a table of keys and values; got 'A study'.",
    ),
    "endpoints neither all nor a list": (
        'endpoints = "all"',
        'endpoints = "every"',
        "family[1] \"All\".endpoints must be 'all' or a list of at least one endpoint name; got 'every'.",
    ),
    "endpoints empty": ('endpoints = "all"', "endpoints = []", "a list of at least one endpoint name; got []."),
    "comparisons": (
        '"each vs reference"',
        '"each vs control"',
        "family[1] \"All\".comparisons must be 'each vs reference', 'all pairs' or a list of pairs of arms such as "
        '[["high", "vehicle"]]; got'
        " 'each vs control'. Did you mean 'each vs reference'?",
    ),
    "a pair of three": (
        '["high", "low"]',
        '["high", "low", "vehicle"]',
        'a list of pairs of arms such as [["high", "vehicle"]]; got',
    ),
    "a table for a list of names": (
        'strata = ["site"]',
        "strata = { site = 1 }",
        "randomisation.strata must be a list; got a table.",
    ),
    "value of another form": (
        'value = "sleep"',
        'value = ["sleep"]',
        'endpoint[2] "Sleep".value must be a column\'s name in quotation marks, or a table '
        "{ parameter = ..., visit = ..., "
        "column = ... }; got ['sleep'].",
    ),
    "a pair of none": (
        '["high", "low"]',
        "[]",
        "; got [[], ['high', 'vehicle']].",
    ),
    "event a list": (
        'event = "yes"',
        'event = ["yes"]',
        "endpoint[3] \"Rash\".event must be text, a number, true or false; got ['yes'].",
    ),
    "where a list": (
        'where = { kept = "Y" }',
        'where = { kept = ["Y"] }',
        "analysis_set[1] \"per protocol\".where.kept must be text, a number, true or false; got ['Y'].",
    ),
    "where empty": (
        'where = { kept = "Y" }',
        "where = {}",
        "where must name at least one column and the value it holds, as in { kept = 'Y' }; got an empty table.",
    ),
    "a date": ("seed = 1", "seed = 2024-01-01", "draws.seed must be a whole number; got 2024-01-01."),
}


@pytest.mark.parametrize(("old", "new", "sentence"), FORM_FAULTS.values(), ids=FORM_FAULTS.keys())
def test_a_fault_of_form_is_one_sentence(plan_text, old, new, sentence):
    with pytest.raises(PlanError, match=re.escape(sentence)):
        parse_plan(plan_text((old, new)), "p.toml")


def test_all_faults_are_reported_at_once_of_form_and_of_rules(plan_text):
    """A wrong form in one section must not hide a broken rule in the others."""
    faults = faults_of(
        plan_text(
            ('title = "A study (invented)"', ""),
            ('better = "lower"', 'better = "down"'),
            ('reference = "vehicle"', 'reference = "vehicel"'),
            ("seed = 1", "seed = 1\nat_least = 5000\nat_most = 1000"),
        )
    )
    assert [fault.split(" must")[0] for fault in faults] == [
        "p.toml: study",
        'p.toml: endpoint[1] "Pain".better',
        "p.toml: randomisation.reference",
        "p.toml: draws.at_least",
    ]


def test_a_section_of_wrong_form_is_not_taken_for_an_absent_one(plan_text):
    """The family's analysis set is there; only its content is wrong."""
    (fault,) = faults_of(plan_text(('where = { kept = "Y" }', "where = {}")))
    assert "must name at least one column" in fault


def test_faulty_items_do_not_make_a_list_too_short(plan_text):
    """One sentence for each faulty family, and none that claims there are no families."""
    faults = faults_of(
        plan_text(('endpoints = "all"', "endpoints = 1"), ('endpoints = ["Pain", "Sleep"]', "endpoints = 2"))
    )
    assert [fault.split(" must")[0] for fault in faults] == [
        'p.toml: family[1] "All".endpoints',
        'p.toml: family[2] "Some".endpoints',
    ]


def test_the_error_survives_pickling(plan_text):
    """Errors cross process borders."""
    with pytest.raises(PlanError, match="seed") as caught:
        parse_plan(plan_text(("seed = 1", "seed = -1")), "p.toml")
    assert pickle.loads(pickle.dumps(caught.value)).faults == caught.value.faults


SYNTAX_FAULTS = {
    "text without marks": (
        "[study]\ntitle = Pain\n",
        "p.toml: a plan must be valid TOML; got an invalid value at line 2, column 9: `title = Pain`. Text needs",
    ),
    "key twice": (
        "a = 1\na = 2\n",
        "must have each key of a section once; got one again at line 2, column 6: `a = 2`. Remove",
    ),
    "table not closed": ("[study", "p.toml: a plan must be valid TOML; got a mistake at the end of the file (expected"),
    "list not closed": ("a = [1,\n", "got an invalid value at the end of the file. Text needs"),
    "nested too deeply": ("a = " + "[" * 100_000, "got brackets nested too deeply"),
}


@pytest.mark.parametrize(("text", "sentence"), SYNTAX_FAULTS.values(), ids=SYNTAX_FAULTS.keys())
def test_a_fault_of_syntax_names_the_line(text, sentence):
    with pytest.raises(PlanError, match=re.escape(sentence)) as caught:
        parse_plan(text, "p.toml")
    assert len(caught.value.faults) == 1


def test_a_missing_file_is_one_sentence(tmp_path):
    with pytest.raises(PlanError, match=r"no\.toml: a plan file must exist; got none at this path\. Check the path\."):
        read_plan(tmp_path / "no.toml")


def test_a_folder_is_no_plan(tmp_path):
    with pytest.raises(PlanError, match=r"a plan must be one file; got a folder\. Name the \.toml file in it\."):
        read_plan(tmp_path)


def test_a_path_through_a_file_is_unreadable(tmp_path):
    (tmp_path / "file").write_text("")
    with pytest.raises(PlanError, match=r"a plan file must be readable; got 'not a directory'"):
        read_plan(tmp_path / "file" / "p.toml")


def test_a_plan_that_is_not_utf8_names_the_line(tmp_path):
    path = tmp_path / "p.toml"
    path.write_bytes(b'[study]\ntitle = "\xe9tude"\n')
    with pytest.raises(PlanError, match=r"p\.toml: a plan must be UTF-8 text; got a byte that is not, in line 2\."):
        read_plan(path)


JUNK = st.one_of(
    st.none().map(lambda _: {}),
    st.booleans(),
    st.integers(-5, 5),
    st.floats(allow_nan=True),
    st.text(max_size=5),
    st.lists(st.one_of(st.integers(0, 3), st.text(max_size=3)), max_size=3),
    st.dictionaries(st.text(max_size=3), st.integers(0, 3), max_size=2),
)
JARGON = re.compile(
    r"pydantic|https?:|Input should|tuple|literal\[|str_type|NoneType|is not of the form|validation error",
    re.IGNORECASE,
)


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=200, deadline=None)
@given(data=st.data(), junk=JUNK)
def test_junk_anywhere_leads_to_plain_sentences_or_a_plan(plan_text, monkeypatch, data, junk):
    """Whatever stands in whatever place, the reader neither breaks nor speaks the record checker's language."""
    tree = tomllib.loads(plan_text())
    places = list(_places(tree))
    holder, key = places[data.draw(st.integers(0, len(places) - 1))]
    holder[key] = junk
    # Junk such as bare nan or nested tables is easier put into the tree than written as TOML.
    monkeypatch.setattr("mtest.plan.read._toml", lambda text, name: tree)
    try:
        parse_plan("", "p.toml")
    except PlanError as error:
        assert error.faults
        for fault in error.faults:
            assert not JARGON.search(fault), fault
            assert fault.startswith("p.toml: ")
            assert fault.endswith((".", "?"))


def _places(node):
    """Yield every (holder, key) of a tree of dicts and lists."""
    for key in node if isinstance(node, dict) else range(len(node)):
        yield node, key
        if isinstance(node[key], (dict, list)):
            yield from _places(node[key])
