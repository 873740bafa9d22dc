"""The batch section shows the expected share of wrong answers, and stays away where there is no batch."""

from __future__ import annotations

import xml.etree.ElementTree as ElementTree

from identify.ranking.batch import BatchError
from identify.report.batch_section import LEAST_QUERIES, build_batch_tables, error_curve_svg
from tests.ranking.test_batch import found


def test_ten_queries_are_a_batch_and_nine_are_not() -> None:
    answers = [found(5, 0.98, 1.0) for _ in range(LEAST_QUERIES)]
    assert build_batch_tables(answers[1:]) == ()
    compound, group = build_batch_tables(answers)
    assert (compound.level, group.level) == ("compound", "isomer group")
    row = next(row for row in compound.rows if row.threshold == "0.95")
    assert row.accepted == "10" and row.by_model.startswith("2") and row.by_second.startswith("<")
    assert next(row for row in compound.rows if row.threshold == "0.99").accepted == "0"


def test_the_curve_is_a_drawing_with_one_line_per_estimate() -> None:
    errors = [BatchError(0.5, 10, 0.2, 0.3), BatchError(0.9, 4, 0.05, 0.0), BatchError(0.99, 0, 0.0, None)]
    drawing = ElementTree.fromstring(error_curve_svg(errors, "b", "compound"))
    lines = drawing.findall("{*}polyline") or drawing.findall("polyline")
    assert len(lines) == 4, "two curves, two samples beside their labels"
    assert all(len(line.attrib["points"].split()) == 2 for line in lines), "nothing is drawn where nothing is accepted"
    assert error_curve_svg([BatchError(0.99, 0, 0.0, None)], "b", "compound") == ""
