"""Verdicts as a JUnit file: a suite for each scenario, a case for each rule and strategy."""

from __future__ import annotations

from collections.abc import Sequence
from xml.etree import ElementTree

from loopsim.study.export import Suite


def junit_text(suites: Sequence[Suite]) -> str:
    """The XML text."""
    root = ElementTree.Element("testsuites")
    for suite in suites:
        counts = {
            outcome: str(sum(one.outcome == outcome for one in suite.cases)) for outcome in ("failure", "skipped")
        }
        numbers = {"failures": counts["failure"], "errors": "0", "skipped": counts["skipped"]}
        head = {"name": suite.name, "tests": str(len(suite.cases)), **numbers}
        element = ElementTree.SubElement(root, "testsuite", head)
        for one in suite.cases:
            case = ElementTree.SubElement(element, "testcase", classname=one.strategy, name=one.rule)
            if one.outcome != "passed":
                ElementTree.SubElement(case, one.outcome, message=one.message)
    ElementTree.indent(root)
    return ElementTree.tostring(root, encoding="unicode", xml_declaration=True) + "\n"
