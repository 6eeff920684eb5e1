"""A block's text checked for sense before anything is built from it."""

from __future__ import annotations

from loopsim.documents.check_balances import check_balances
from loopsim.documents.check_circles import check_circles
from loopsim.documents.check_names import check_names
from loopsim.documents.check_sections import check_sections
from loopsim.documents.check_units import check_units
from loopsim.documents.namespace import Names
from loopsim.documents.types import Block
from loopsim.errors import Problems


def check_block(block: Block, problems: Problems) -> None:
    """Note all that is wrong in a block: names, sections, balances, circles among formulas, and every unit."""
    names = Names(block)
    reached = check_names(block, names, problems)
    check_sections(block, names, problems)
    check_balances(block, names, problems)
    circles = check_circles(block, names, problems)
    check_units(block, names, reached, circles, problems)
