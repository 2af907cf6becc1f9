"""From assembly to machine code of this host."""

from __future__ import annotations

import sys
from collections.abc import Sequence
from functools import lru_cache
from typing import Any

import numpy as np

from ruleout.kernel.assembly import Assembly
from ruleout.kernel.elementary import SYMBOLS, Elementary
from ruleout.kernel.emission import Emission
from ruleout.kernel.lowering import Lowered
from ruleout.kernel.schedule import Integers
from ruleout.kernel.steps import STEP_FUNCTIONS, SYSTEM_FUNCTIONS, Steps, scratch_vectors
from ruleout.kernel.types import Array


class MachineCode:
    """A compiled module. Its addresses are good as long as this object lives.

    Parameters
    ----------
    text : str
    names : sequence of str
        Functions whose addresses are wanted.
    effort : int
        How hard LLVM works before it generates code, 0 to 3.
    """

    def __init__(self, text: str, names: Sequence[str], effort: int) -> None:
        import llvmlite.binding as llvm

        machine = _machine()
        module = llvm.parse_assembly(text, context=llvm.create_context())
        module.triple = machine.triple
        module.data_layout = str(machine.target_data)
        options = llvm.create_pipeline_tuning_options(speed_level=effort)
        options.loop_vectorization = False
        options.slp_vectorization = False
        builder = llvm.create_pass_builder(machine, options)
        if effort:
            builder.getModulePassManager().run(module, builder)
        self._engine = llvm.create_mcjit_compiler(module, machine)
        self._engine.finalize_object()
        self.addresses: Integers = np.array(
            [self._engine.get_function_address(name) for name in names], dtype=np.int64
        )


class SystemCode:
    """Machine code of one system.

    Attributes
    ----------
    width : int
        Number of lanes W.
    steps, functions : int64 arrays
        Addresses of :data:`STEP_FUNCTIONS` and :data:`SYSTEM_FUNCTIONS`.
    prepared, scratch : int
        Vectors of memory that ``c`` and ``scratch`` need.
    """

    def __init__(
        self, lowered: Lowered, totals: Array, pivots: tuple[int, ...], width: int | None = None
    ) -> None:
        self.width = width or host_width()
        self._shared = _shared_code(self.width)
        known = self._shared.addresses.tolist()
        elementary = dict(zip(SYMBOLS, known[len(STEP_FUNCTIONS) :], strict=True))
        assembly = Assembly(self.width)
        emission = Emission(assembly, Elementary(assembly, elementary), lowered, totals, pivots)
        emission.write()
        names = list(SYSTEM_FUNCTIONS)
        if not pivots:
            names = [name.replace("newton_factor", "factor") for name in names]
        self._system = MachineCode(assembly.text(), names, effort=0)
        self.functions = self._system.addresses
        self.steps = self._shared.addresses[: len(STEP_FUNCTIONS)]
        self.prepared = emission.prepared
        self.scratch = scratch_vectors(len(lowered.states), emission.factors)


@lru_cache(maxsize=4)
def _shared_code(width: int) -> MachineCode:
    """Return the code that all systems share: steps, then elementary functions."""
    assembly = Assembly(width)
    Steps(assembly).write()
    return MachineCode(assembly.text(), (*STEP_FUNCTIONS, *SYMBOLS), effort=2)


def host_width() -> int:
    """Return how many lanes suit this host: two of its vectors.

    Elementary functions are long chains of dependent operations; two side by side fill the gaps.
    """
    import llvmlite.binding as llvm

    features = llvm.get_host_cpu_features()
    if features.get("avx512f") and features.get("avx512dq"):
        return 16
    return 8 if features.get("avx2") else 4


def _machine() -> Any:
    """Return a new target machine; the engine it is given to takes it over."""
    import llvmlite.binding as llvm

    llvm.initialize_native_target()
    llvm.initialize_native_asmprinter()
    triple = llvm.get_process_triple()
    # The loader of machine code knows ELF on every system, but not Windows' own format.
    target = llvm.Target.from_triple(f"{triple}-elf" if sys.platform == "win32" else triple)
    features = llvm.get_host_cpu_features()
    # LLVM would halve 512-bit vectors on some hosts, to spare others on the same chip.
    features["prefer-256-bit"] = False
    return target.create_target_machine(
        cpu=llvm.get_host_cpu_name(), features=features.flatten(), opt=2, codemodel="jitdefault"
    )
