"""Compiled modules loaded into the process, kept on disk between processes."""

from __future__ import annotations

import ctypes
import ctypes.util
import hashlib
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import llvmlite
import llvmlite.binding as llvm

from loopsim import store
from loopsim.native.compiler import Module
from loopsim.native.kinds import LIBRARY

VERSION = "3"
C_NAMES = {
    "power": "pow",
    "exponential": "exp",
    "logarithm": "log",
    "logarithm10": "log10",
    "sine": "sin",
    "cosine": "cos",
    "tangent": "tan",
    "hyperbolic_tangent": "tanh",
}
C_TYPES: dict[str, Any] = {"f": ctypes.c_double, "i": ctypes.c_int64}


@dataclass(frozen=True, slots=True)
class Native:
    """Entry points of a compiled text; holds on to the engine that owns their code."""

    entries: Mapping[str, Callable[..., Any]]
    owner: Any


def build_native(text: str, entries: Mapping[str, tuple[str, ...]], cache: Path | None = None) -> Native:
    """Compile a text for the given entries: name -> kinds of its arguments (see `compiler`).

    `cache`: folder of compiled objects, safe to delete at any time; an unwritable one is done without.
    """
    _prepare_process()
    machine = _target_machine()
    key = _key(text, entries, machine)
    path = cache / f"{key}.o" if cache is not None else None
    code = store.read(path) if path is not None else None
    if code is None:
        code = _compiled(text, entries, machine)
        if path is not None:
            store.write(path, code)
    owner = llvm.create_mcjit_compiler(llvm.parse_assembly(""), _target_machine())
    owner.add_object_file(llvm.ObjectFileRef.from_data(code))
    owner.finalize_object()
    found = {}
    for name, kinds in entries.items():
        address = owner.get_function_address(f"text_{name}")
        signature = ctypes.CFUNCTYPE(ctypes.c_int64, *[C_TYPES.get(kind, ctypes.c_void_p) for kind in kinds])
        found[name] = signature(address)
    return Native(found, owner)


_ready = False


def _prepare_process() -> None:
    """Bind the C library's functions under names of our own, once."""
    global _ready
    if _ready:
        return
    llvm.initialize_native_target()
    llvm.initialize_native_asmprinter()
    library = ctypes.CDLL(ctypes.util.find_library("m") or None)
    for name in LIBRARY:
        address = ctypes.cast(getattr(library, C_NAMES[name]), ctypes.c_void_p).value
        llvm.add_symbol(f"loopsim_{name}", address)
    _ready = True


def _target_machine() -> Any:
    target = llvm.Target.from_triple(llvm.get_process_triple())
    features = llvm.get_host_cpu_features().flatten()
    return target.create_target_machine(cpu=llvm.get_host_cpu_name(), features=features, opt=2, jit=True)


def _key(text: str, entries: Mapping[str, tuple[str, ...]], machine: Any) -> str:
    parts = (
        VERSION,
        llvmlite.__version__,
        llvm.get_host_cpu_name(),
        machine.triple,
        repr(sorted(entries.items())),
        text,
    )
    return hashlib.sha256("\0".join(parts).encode()).hexdigest()


def _compiled(text: str, entries: Mapping[str, tuple[str, ...]], machine: Any) -> bytes:
    module = Module(text)
    for name, kinds in entries.items():
        module.entry(name, kinds)
    parsed = llvm.parse_assembly(module.llvm())
    parsed.verify()
    # a tenth slower code than from the optimiser's own second level, in a sixth of its time
    builder = llvm.create_pass_builder(machine, llvm.create_pipeline_tuning_options())
    passes = llvm.create_new_module_pass_manager()
    passes.add_sroa_pass()
    passes.add_always_inliner_pass()
    passes.add_sroa_pass()
    passes.add_simplify_cfg_pass()
    passes.add_new_gvn_pass()
    passes.add_instruction_combine_pass()
    passes.add_dead_code_elimination_pass()
    passes.run(parsed, builder)
    return bytes(machine.emit_object(parsed))
