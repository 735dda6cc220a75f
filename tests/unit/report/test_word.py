"""The document holds real tables, repeats their heads, and is the same file for the same result."""

import zipfile
from dataclasses import replace

import pytest
from docx import Document
from docx.oxml.ns import qn

from mtest.report.facts import gather_facts
from mtest.report.tables import results_table
from mtest.report.word import write_word


@pytest.fixture(scope="module")
def written(four_arms, tmp_path_factory):
    path = tmp_path_factory.mktemp("word") / "tables.docx"
    write_word(four_arms, path)
    return path


def test_the_same_result_gives_the_same_bytes_whenever_it_was_run(four_arms, written, tmp_path):
    later = replace(four_arms, run=replace(four_arms.run, finished_utc="2031-01-01T00:00:00Z"))
    write_word(later, tmp_path / "again.docx")
    assert (tmp_path / "again.docx").read_bytes() == written.read_bytes()


def test_the_archive_carries_no_date(written):
    with zipfile.ZipFile(written) as archive:
        assert {entry.date_time for entry in archive.infolist()} == {(1980, 1, 1, 0, 0, 0)}
        assert archive.namelist()[0] == "[Content_Types].xml"
    core = Document(written).core_properties
    assert core.created == core.modified
    assert core.created.year == 1980


def test_the_results_table_holds_every_cell_of_the_model(four_arms, written):
    model = results_table(gather_facts(four_arms).families[0])
    table = next(t for t in Document(written).tables if t.rows[0].cells[-1].text == "Decision")
    assert len(table.rows) == 43
    shown = [cell.text for cell in table.rows[7].cells]
    expected = [cell.text + (f"\n{cell.second}" if cell.second else "") for cell in model.rows[6]]
    assert shown == expected


def test_every_table_repeats_its_head_and_keeps_its_rows_whole(written):
    tables = Document(written).tables
    assert len(tables) == 4
    for table in tables:
        properties = [row._tr.trPr for row in table.rows]
        assert properties[0].find(qn("w:tblHeader")) is not None
        assert all(row.find(qn("w:cantSplit")) is not None for row in properties)


def test_the_page_is_landscape_a4_with_title_protocol_and_page_fields(written):
    section = Document(written).sections[0]
    assert (round(section.page_width.mm), round(section.page_height.mm)) == (297, 210)
    assert "DEMO-41" in section.header.paragraphs[0].text
    assert "neck pain" in section.header.paragraphs[0].text
    fields = [field.get(qn("w:instr")) for field in section.footer._element.iter(qn("w:fldSimple"))]
    assert fields == ["PAGE", "NUMPAGES"]


def test_control_unsettled_and_warnings_are_in_the_document(two_families, tmp_path):
    write_word(two_families, tmp_path / "two.docx")
    text = "\n".join(paragraph.text for paragraph in Document(tmp_path / "two.docx").paragraphs)
    for family in two_families.families:
        assert family.control in text
        assert all(warning in text for warning in family.warnings)
    assert "Not settled by the draws made" in text
    assert two_families.warnings[0] in text
    assert "Cautions" in text
