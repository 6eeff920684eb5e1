"""Verdicts as a JUnit file: a suite for each scenario, a case for each rule and strategy."""

from __future__ import annotations

from collections.abc import Mapping
from xml.etree import ElementTree

from loopsim.study.tables import shown
from loopsim.study.types import RuleVerdict, StrategyVerdict


def junit_text(scenarios: Mapping[str, Mapping[str, StrategyVerdict]]) -> str:
    """The XML text; a rule that is inconclusive counts as an error, one that does not apply as skipped."""
    root = ElementTree.Element("testsuites")
    for scenario, verdicts in scenarios.items():
        suite = ElementTree.SubElement(root, "testsuite", name=scenario)
        for strategy, verdict in verdicts.items():
            for one in verdict.rules:
                _case(suite, strategy, one)
            if verdict.run.failure:
                case = ElementTree.SubElement(suite, "testcase", classname=strategy, name="run")
                ElementTree.SubElement(case, "error", message=verdict.run.failure)
        for count, tag in (("failures", "failure"), ("errors", "error"), ("skipped", "skipped")):
            suite.set(count, str(len(suite.findall(f"testcase/{tag}"))))
        suite.set("tests", str(len(suite.findall("testcase"))))
    ElementTree.indent(root)
    return ElementTree.tostring(root, encoding="unicode", xml_declaration=True) + "\n"


def _case(suite: ElementTree.Element, strategy: str, one: RuleVerdict) -> None:
    case = ElementTree.SubElement(suite, "testcase", classname=strategy, name=one.rule.text)
    value = shown(one.finding) if one.finding.value is not None else one.finding.reason
    if one.verdict == "failed":
        ElementTree.SubElement(case, "failure", message=value)
    elif one.verdict == "inconclusive":
        ElementTree.SubElement(case, "error", message=value)
    elif one.verdict == "not_applicable":
        ElementTree.SubElement(case, "skipped", message=value)
