"""The tables as a Word document: real tables, the same bytes for the same result."""

from __future__ import annotations

import zipfile
from datetime import datetime
from io import BytesIO
from os import PathLike
from pathlib import Path

from docx import Document
from docx.document import Document as DocumentObject
from docx.enum.section import WD_ORIENT
from docx.enum.table import WD_TABLE_ALIGNMENT
from docx.enum.text import WD_ALIGN_PARAGRAPH, WD_TAB_ALIGNMENT
from docx.oxml import OxmlElement
from docx.oxml.ns import qn
from docx.shared import Mm, Pt, RGBColor
from docx.table import Table as WordTable
from docx.table import _Cell, _Row
from docx.text.paragraph import Paragraph

from mtest.report.facts import FamilyFacts, ReportFacts, gather_facts
from mtest.report.method import describe_method, describe_run, list_references
from mtest.report.tables import Cell, Table, accounting_table, decision_matrix, results_table, summaries_table
from mtest.report.wording import CAUTIONS, GLOSSARY
from mtest.results import AnalysisResult

PAGE_WIDTH, PAGE_HEIGHT, MARGIN = Mm(297), Mm(210), Mm(16)
TEXT_WIDTH = PAGE_WIDTH - 2 * MARGIN
FIXED_TIME = datetime(1980, 1, 1)  # the earliest a zip archive can hold: the document carries no date of its own
ACCENT = RGBColor(0x0B, 0x5C, 0x8A)
ALIGN = {
    "left": WD_ALIGN_PARAGRAPH.LEFT,
    "right": WD_ALIGN_PARAGRAPH.RIGHT,
    "centre": WD_ALIGN_PARAGRAPH.CENTER,
}


def write_word(result: AnalysisResult, path: str | PathLike[str]) -> None:
    """Write the report's tables, method and cautions as a Word document on landscape A4.

    Parameters
    ----------
    result : AnalysisResult
    path : where the document goes; an existing file is replaced

    Notes
    -----
    The document's own dates are fixed and its archive is packed in a fixed order, so that the same result gives the
    same bytes (tests/unit/report/test_word.py).
    """
    facts = gather_facts(result)
    document = Document()
    _set_page(document, facts)
    document.add_heading(facts.title, level=0)
    document.add_paragraph(facts.status)
    for family in facts.families:
        _add_answer(document, family)
    _add_list(document, facts.warnings, "Warnings for the study")
    for family in facts.families:
        document.add_page_break()
        subtitle = (f"Analysis set: {family.raw.analysis_set or 'all randomised subjects'}", family.raw.control)
        _add_table(document, results_table(family), subtitle)
        document.add_page_break()
        _add_table(document, summaries_table(family), subtitle[:1])
    document.add_page_break()
    _add_table(document, accounting_table(facts), ("All randomised subjects",))
    _add_words(document, facts)
    _pack(document, Path(path))


def _set_page(document: DocumentObject, facts: ReportFacts) -> None:
    """Page, type, header, footer and the fixed properties."""
    section = document.sections[0]
    section.orientation = WD_ORIENT.LANDSCAPE
    section.page_width, section.page_height = PAGE_WIDTH, PAGE_HEIGHT
    section.left_margin = section.right_margin = MARGIN
    section.top_margin, section.bottom_margin = Mm(24), Mm(20)
    section.header_distance = section.footer_distance = Mm(11)
    styles = document.styles
    for name, size in (("Normal", 9), ("Title", 18), ("Heading 1", 13), ("Heading 2", 10.5)):
        style = styles[name]
        style.font.name, style.font.size = "Arial", Pt(size)
        # The template's headings take their typeface from a theme, which would win over the name.
        fonts = style.element.get_or_add_rPr().get_or_add_rFonts()
        for key in ("asciiTheme", "hAnsiTheme", "eastAsiaTheme", "cstheme"):
            fonts.attrib.pop(qn(f"w:{key}"), None)
        if name != "Normal":
            style.font.color.rgb = RGBColor(0x20, 0x26, 0x2C)
            style.font.bold = name.startswith("Heading")
    styles["Normal"].paragraph_format.space_after = Pt(4)
    styles["Normal"].element.get_or_add_rPr().append(_element("w:lang", val="en-GB"))
    border = styles["Title"].element.find(qn("w:pPr")).find(qn("w:pBdr"))
    if border is not None:
        border.getparent().remove(border)
    head = _ends(section.header.paragraphs[0])
    head.add_run(f"{facts.title}\t{'Protocol ' + facts.protocol if facts.protocol else ''}")
    foot = _ends(section.footer.paragraphs[0])
    run = facts.result.run
    foot.add_run(f"mtest {run.mtest_version}; {run.plan_file}, SHA-256 {run.plan_sha256[:12]}…; seed {run.seed}\tPage ")
    _add_field(foot, "PAGE")
    foot.add_run(" of ")
    _add_field(foot, "NUMPAGES")
    core = document.core_properties
    core.title, core.subject = facts.title, f"Protocol {facts.protocol}" if facts.protocol else ""
    core.author = core.last_modified_by = f"mtest {run.mtest_version}"
    core.comments, core.language = "", "en-GB"
    core.created = core.modified = FIXED_TIME


def _add_answer(document: DocumentObject, family: FamilyFacts) -> None:
    document.add_heading(f"The answer, family “{family.raw.name}”", level=1)
    document.add_paragraph().add_run(" ".join(family.answer)).bold = True
    _add_list(document, family.control, "What is controlled")
    _add_list(document, family.unsettled, "Not settled by the draws made")
    _add_list(document, family.warnings, "Warnings for this family")
    if family.saving:
        document.add_paragraph(family.saving)
    _add_table(document, decision_matrix(family), ())


def _add_words(document: DocumentObject, facts: ReportFacts) -> None:
    document.add_page_break()
    document.add_heading("Method", level=1)
    _add_entries(document, describe_method(facts))
    document.add_heading("Terms", level=1)
    _add_entries(document, tuple((term, (text,)) for term, text in GLOSSARY.values()))
    document.add_heading("Cautions", level=1)
    _add_list(document, CAUTIONS, "")
    document.add_heading("References", level=1)
    for reference in list_references(facts):
        document.add_paragraph(reference)
    document.add_heading("Reproduction", level=1)
    _add_entries(document, describe_run(facts))


def _add_entries(document: DocumentObject, entries: tuple[tuple[str, tuple[str, ...]], ...]) -> None:
    for term, paragraphs in entries:
        for place, text in enumerate(paragraphs):
            paragraph = document.add_paragraph()
            if place == 0:
                paragraph.add_run(f"{term}. ").bold = True
            paragraph.add_run(text)


def _add_list(document: DocumentObject, texts: tuple[str, ...], head: str) -> None:
    if texts and head:
        document.add_paragraph().add_run(head).bold = True
    for text in texts:
        document.add_paragraph(text, style="List Bullet")


def _add_table(document: DocumentObject, table: Table, subtitles: tuple[str, ...]) -> None:
    """A caption, lines below it, the table with a head that comes again on each page, and its notes."""
    document.add_heading(table.caption, level=2).paragraph_format.keep_with_next = True
    for text in subtitles:
        document.add_paragraph(text).paragraph_format.keep_with_next = True
    word = document.add_table(rows=1, cols=len(table.columns))
    word.alignment = WD_TABLE_ALIGNMENT.LEFT
    word.autofit = False
    _set_table(word, table.caption)
    widths = _widths(table)
    for grid, width in zip(word.columns, widths, strict=True):
        grid.width = width
    _mark_head(word.rows[0])
    for cell, column, width in zip(word.rows[0].cells, table.columns, widths, strict=True):
        cell.width = width
        _fill(cell, Cell(text=column.head, strong=True), column.align, plain=True)
        _rule(cell, top=8, bottom=4)
    for number, row in enumerate(table.rows, 1):
        line = word.add_row()
        _keep_whole(line)
        for cell, content, column, width in zip(line.cells, row, table.columns, widths, strict=True):
            cell.width = width
            _fill(cell, content, column.align)
            _rule(cell, bottom=8 if number == len(table.rows) else 2)
    for note in table.notes:
        paragraph = document.add_paragraph()
        paragraph.paragraph_format.space_after = Pt(1)
        paragraph.add_run(note).font.size = Pt(7.5)


def _widths(table: Table) -> list[int]:
    """Column widths from their shares; a table of few columns stays narrower than the page."""
    total = sum(column.share for column in table.columns)
    room = TEXT_WIDTH * min(1.0, 0.11 * (total + 1.0))
    return [int(room * column.share / total) for column in table.columns]


def _fill(cell: _Cell, content: Cell, align: str, *, plain: bool = False) -> None:
    paragraph = cell.paragraphs[0]
    paragraph.alignment = ALIGN[align]
    paragraph.paragraph_format.space_after = Pt(1)
    paragraph.paragraph_format.space_before = Pt(1)
    run = paragraph.add_run(content.text)
    run.font.size, run.bold = Pt(7.5), content.strong
    if content.strong and not plain:
        run.font.color.rgb = ACCENT
    if content.second:
        joint = "\n" if content.sort is not None else " "
        paragraph.add_run(joint + content.second).font.size = Pt(6.5)


def _mark_head(row: _Row) -> None:
    properties = row._tr.get_or_add_trPr()
    properties.append(_element("w:cantSplit"))
    properties.append(_element("w:tblHeader"))


def _keep_whole(row: _Row) -> None:
    row._tr.get_or_add_trPr().append(_element("w:cantSplit"))


def _set_table(word: WordTable, caption: str) -> None:
    """Narrow cell margins, and the table's name for those who hear the document."""
    margins = OxmlElement("w:tblCellMar")
    for edge in ("left", "right"):
        margins.append(_element(f"w:{edge}", w="60", type="dxa"))
    properties = word._tbl.tblPr
    properties.find(qn("w:tblLook")).addprevious(margins)  # the schema fixes the order
    properties.append(_element("w:tblCaption", val=caption))


def _rule(cell: _Cell, **edges: int) -> None:
    """Thin lines above or below a cell, in eighths of a point."""
    borders = OxmlElement("w:tcBorders")
    for edge in ("top", "bottom"):
        if edge in edges:
            colour = "20262C" if edges[edge] > 2 else "D5DADE"
            borders.append(_element(f"w:{edge}", val="single", sz=str(edges[edge]), space="0", color=colour))
    cell._tc.get_or_add_tcPr().append(borders)


def _ends(paragraph: Paragraph) -> Paragraph:
    """A header or footer line with its second part at the right margin."""
    stops = paragraph.paragraph_format.tab_stops
    paragraph.style.paragraph_format.tab_stops.clear_all()
    stops.add_tab_stop(TEXT_WIDTH, WD_TAB_ALIGNMENT.RIGHT)
    paragraph.style.font.size = Pt(8)
    return paragraph


def _add_field(paragraph: Paragraph, name: str) -> None:
    """A field Word fills in, such as the page's number."""
    field = _element("w:fldSimple", instr=name)
    run = OxmlElement("w:r")
    text = OxmlElement("w:t")
    text.text = "1"
    run.append(text)
    field.append(run)
    paragraph._p.append(field)


def _element(tag: str, **attributes: str):
    element = OxmlElement(tag)
    for name, value in attributes.items():
        element.set(qn(f"w:{name}"), value)
    return element


def _pack(document: DocumentObject, path: Path) -> None:
    """Save with a fixed order and fixed dates: a zip archive otherwise carries the moment it was made."""
    loose = BytesIO()
    document.save(loose)
    with zipfile.ZipFile(loose) as source, zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as packed:
        # The content types come first, as the packaging standard's readers expect; the rest by name.
        for name in sorted(source.namelist(), key=lambda name: (name != "[Content_Types].xml", name)):
            entry = zipfile.ZipInfo(name, date_time=FIXED_TIME.timetuple()[:6])
            entry.compress_type = zipfile.ZIP_DEFLATED
            entry.external_attr = 0o600 << 16
            packed.writestr(entry, source.read(name))
