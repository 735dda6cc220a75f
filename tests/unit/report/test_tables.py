"""The tables hold every hypothesis once, in the plan's order, and contradict no decision."""

from dataclasses import replace

from mtest.report import tables
from mtest.report.facts import gather_facts
from mtest.report.wording import GLOSSARY


def test_results_have_one_row_for_each_hypothesis_in_the_plans_order(four_arms):
    family = gather_facts(four_arms).families[0]
    rows = tables.results_table(family).rows
    expected = [(h.endpoint, f"{h.arm} vs {h.reference}") for h in four_arms.families[0].hypotheses]
    assert [(row[0].text, row[1].text) for row in rows] == expected


def test_every_row_has_as_many_cells_as_there_are_columns(two_families):
    facts = gather_facts(two_families)
    made = [tables.accounting_table(facts)]
    for family in facts.families:
        made += [tables.decision_matrix(family), tables.results_table(family), tables.summaries_table(family)]
    for table in made:
        assert {len(row) for row in table.rows} == {len(table.columns)}


def test_where_estimates_are_adjusted_for_strata_the_notes_call_the_arms_columns_raw(four_arms, crowded):
    for result, expected in ((four_arms, 0), (crowded, 1)):
        family = gather_facts(result).families[0]
        for table in (tables.results_table(family), tables.summaries_table(family)):
            assert sum("raw means and shares" in note for note in table.notes) == expected


def test_every_column_term_stands_in_the_glossary(four_arms):
    family = gather_facts(four_arms).families[0]
    terms = {column.term for column in tables.results_table(family).columns if column.term}
    assert len(terms) > 8
    assert terms <= set(GLOSSARY)


def test_a_decision_is_told_by_its_mark_and_not_by_colour(two_families):
    first = gather_facts(two_families).families[0]
    rows = tables.results_table(first).rows
    marks = {tables.HANGING, tables.REJECTED, tables.KEPT}
    assert {row[-1].text[0] for row in rows} == marks
    for row, h in zip(rows, first.hypotheses, strict=True):
        assert (row[-1].text[0] == tables.HANGING) == (not h.raw.settled)
        assert row[-1].text[2:].startswith("rejected" if h.raw.rejected else "not rejected")


def test_sort_values_are_the_unrounded_ones(four_arms):
    family = gather_facts(four_arms).families[0]
    table = tables.results_table(family)
    place = [column.head for column in table.columns].index("p, adjusted")
    assert [row[place].sort for row in table.rows] == [h.raw.p_adjusted for h in family.hypotheses]


def test_the_matrix_leaves_a_gap_where_a_comparison_was_not_planned(four_arms):
    family = four_arms.families[0]
    partial = replace(four_arms, families=(replace(family, hypotheses=family.hypotheses[1:]),))
    matrix = tables.decision_matrix(gather_facts(partial).families[0])
    gaps = [cell for row in matrix.rows for cell in row if cell.spoken == "not tested"]
    assert len(gaps) == 1


def test_a_long_matrix_shows_the_rejected_and_counts_the_others(four_arms):
    family = four_arms.families[0]
    many = tuple(
        replace(h, endpoint=f"{h.endpoint} {copy}", rejected=h.rejected and copy == 0)
        for copy in range(6)
        for h in family.hypotheses
    )
    matrix = tables.decision_matrix(
        gather_facts(replace(four_arms, families=(replace(family, hypotheses=many),))).families[0]
    )
    rejected = {h.endpoint for h in many if h.rejected}
    assert {row[0].text for row in matrix.rows} == rejected
    assert any(note.startswith(f"{84 - len(rejected)} endpoints without a rejection") for note in matrix.notes)


def test_accounting_adds_up_to_the_randomised(four_arms):
    for count in four_arms.accounting:
        assert count.n_analysed + count.n_missing == count.n_randomised
    table = tables.accounting_table(gather_facts(four_arms))
    count = four_arms.accounting[0]
    assert table.rows[0][2].text == f"{count.n_analysed} ({count.n_missing}, {count.n_filled})"
    assert table.columns[2].head == "vehicle (N=62)"
