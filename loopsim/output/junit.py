"""Verdicts as a JUnit file: a suite for each scenario, a case for each rule and strategy."""

from __future__ import annotations

from collections.abc import Sequence
from xml.etree import ElementTree

from loopsim.study.export import Suite

COUNTED = {"failures": "failure", "errors": "error", "skipped": "skipped"}


def junit_text(suites: Sequence[Suite]) -> str:
    """The XML text, to be written as UTF-8."""
    root = ElementTree.Element("testsuites")
    for suite in suites:
        counts = {name: str(sum(one.outcome == outcome for one in suite.cases)) for name, outcome in COUNTED.items()}
        head = {"name": _clean(suite.name), "tests": str(len(suite.cases)), **counts}
        element = ElementTree.SubElement(root, "testsuite", head)
        for one in suite.cases:
            names = {"classname": _clean(one.strategy), "name": _clean(one.rule)}
            case = ElementTree.SubElement(element, "testcase", names)
            if one.outcome != "passed":
                ElementTree.SubElement(case, one.outcome, message=_clean(one.message))
    ElementTree.indent(root)
    # by way of bytes: as text the declaration would name the encoding of this machine
    written: bytes = ElementTree.tostring(root, encoding="utf-8", xml_declaration=True)
    return written.decode("utf-8") + "\n"


def _clean(text: str) -> str:
    """A text of the user's without what XML does not allow."""
    return "".join(one if one.isprintable() else " " for one in text)
