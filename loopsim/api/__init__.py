"""What the commands do: one function each, files in, results as data out."""

from loopsim.api.blocks import block_json, block_page, block_table
from loopsim.api.check import check, generated_text
from loopsim.api.run import RunReport, run, simulate
from loopsim.api.steady import SteadyReport, model_source, steady, steady_values

__all__ = [
    "RunReport",
    "SteadyReport",
    "block_json",
    "block_page",
    "block_table",
    "check",
    "generated_text",
    "model_source",
    "run",
    "simulate",
    "steady",
    "steady_values",
]
