"""How the resolved bubble's compiled functions call each other.

The compiler optimises a function anew inside each caller, so that a chain of heavy functions takes
many times what each of them takes. The heavy ones are therefore called by address: compiled once,
for known types, and left alone. What is only called from compiled code needs no way in from Python.
"""

from __future__ import annotations

from typing import Any

from numba import njit, typeof, types
from numba.core import cgutils
from numba.extending import intrinsic

_COMMON = {"cache": True, "error_model": "numpy", "no_cfunc_wrapper": True}
# What makes no arrays need not count who holds those it is given, which is most of the code.
outer = njit(**_COMMON, _nrt=False)
inner = njit(**_COMMON, _nrt=False, no_cpython_wrapper=True)
inner_fast = njit(**_COMMON, _nrt=False, no_cpython_wrapper=True, fastmath=True)
making = njit(**_COMMON, _nrt=True, no_cpython_wrapper=True)  # makes arrays


def address_of(function: Any, *arguments: Any) -> int:
    """Address of a compiled function for arguments of these types; ``call`` takes both.

    Compiles it, or fetches it from the disk, if that was not done before.
    """
    kinds = types.void(*(typeof(one) for one in arguments))
    compiled = function.get_compile_result(kinds)
    return int(compiled.library.get_pointer_to_function(compiled.fndesc.llvm_func_name))


@intrinsic
def call(_context: Any, address: Any, arguments: Any) -> Any:
    """Call the function at an address of ``address_of`` with a tuple of exactly its arguments."""
    kinds = arguments.types

    def lower(context: Any, builder: Any, _signature: Any, given: Any) -> Any:
        values = [builder.extract_value(given[1], i) for i in range(len(kinds))]
        called = context.call_conv.get_function_type(types.none, kinds)
        pointer = builder.inttoptr(given[0], called.as_pointer())
        status, _ = context.call_conv.call_function(builder, pointer, types.none, kinds, values)
        with cgutils.if_unlikely(builder, status.is_error):
            context.call_conv.return_status_propagate(builder, status)
        return context.get_dummy_value()

    return types.none(address, arguments), lower


@outer
def reach(address: int, arguments: Any) -> None:
    """As ``call``, from Python."""
    call(address, arguments)
