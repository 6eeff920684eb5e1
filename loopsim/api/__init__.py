"""What the commands do: one function each, files in, results as data out."""

from loopsim.api.checking import check, generated_text
from loopsim.api.listing import block_json, block_page, block_table, blocks_json
from loopsim.api.resting import SteadyReport, model_source, steady, steady_values
from loopsim.api.running import RunReport, run, simulate

__all__ = [
    "RunReport",
    "SteadyReport",
    "block_json",
    "block_page",
    "block_table",
    "blocks_json",
    "check",
    "generated_text",
    "model_source",
    "run",
    "simulate",
    "steady",
    "steady_values",
]
