# mypy: disable-error-code="untyped-decorator, no-untyped-call, unused-ignore"
"""Memory as the compiled kernel reaches it: by address, one vector or one number at a time.

`s` is the table of integers, `f` the table of floats beside it; both stand still during a march, and the compiler is told so.
`w` is the scratch memory: rows of LANES doubles. Nothing here checks bounds: the door validates every shape, and scratch
memory lies between guard words.
"""

from typing import Any

from llvmlite import ir
from numba.core import types

from sweep.kernel.layout import STRIDE
from sweep.kernel.vector import DOUBLE, DOUBLES, LONG, VectorType, intrinsic, vector, widened

_VECTOR_ALIGNMENT = 64


def _address(builder: Any, base: Any, index: Any, bytes_each: int, kind: Any) -> Any:
    """Return a pointer to element `index` of an array of `bytes_each` bytes at an integer address."""
    shift = builder.mul(index, ir.Constant(LONG, bytes_each))
    return builder.inttoptr(builder.add(base, shift), kind.as_pointer())


def _unchanging(builder: Any, pointer: Any) -> Any:
    """Return what stands at a place that nothing writes during a march."""
    value = builder.load(pointer)
    value.set_metadata("invariant.load", builder.module.add_metadata([]))
    return value


@intrinsic
def entry(typing: Any, s: Any, position: Any) -> Any:
    """Return an entry of the integer table."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return _unchanging(builder, _address(builder, args[0], args[1], 8, LONG))

    return types.int64(types.int64, types.int64), code


@intrinsic
def coefficient(typing: Any, f: Any, position: Any) -> Any:
    """Return an entry of the float table."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return _unchanging(builder, _address(builder, args[0], args[1], 8, DOUBLE))

    return types.float64(types.int64, types.int64), code


@intrinsic
def row(typing: Any, s: Any, w: Any, name: Any) -> Any:
    """Return the address of the array in scratch memory whose first row the header names."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        first = _unchanging(builder, _address(builder, args[0], args[2], 8, LONG))
        return builder.add(args[1], builder.mul(first, ir.Constant(LONG, STRIDE)))

    return types.int64(types.int64, types.int64, types.int64), code


@intrinsic
def load(typing: Any, array: Any, index: Any) -> Any:
    """Return vector `index` of an array of vectors."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return builder.load(_address(builder, args[0], args[1], STRIDE, DOUBLES), align=_VECTOR_ALIGNMENT)

    return vector(types.int64, types.int64), code


@intrinsic
def store(typing: Any, array: Any, index: Any, value: Any) -> Any:
    """Write vector `index` of an array of vectors; a scalar goes to every lane."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        place = _address(builder, args[0], args[1], STRIDE, DOUBLES)
        builder.store(widened(builder, args[2]), place, align=_VECTOR_ALIGNMENT)
        return context.get_dummy_value()

    kind = vector if isinstance(value, VectorType) else types.float64
    return types.void(types.int64, types.int64, kind), code


@intrinsic
def of_lane(typing: Any, place: Any, index: Any) -> Any:
    """Return one lane's number in vector `index`; `place` is the array's address plus 8 times the lane."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return builder.load(_address(builder, args[0], args[1], STRIDE, DOUBLE))

    return types.float64(types.int64, types.int64), code


@intrinsic
def keep(typing: Any, place: Any, index: Any, value: Any) -> Any:
    """Set one lane's number in vector `index`; `place` is the array's address plus 8 times the lane."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        builder.store(args[2], _address(builder, args[0], args[1], STRIDE, DOUBLE))
        return context.get_dummy_value()

    return types.void(types.int64, types.int64, types.float64), code


@intrinsic
def number(typing: Any, array: Any, index: Any) -> Any:
    """Return double `index` of an array of doubles."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return builder.load(_address(builder, args[0], args[1], 8, DOUBLE))

    return types.float64(types.int64, types.int64), code


@intrinsic
def put(typing: Any, array: Any, index: Any, value: Any) -> Any:
    """Write double `index` of an array of doubles."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        builder.store(args[2], _address(builder, args[0], args[1], 8, DOUBLE))
        return context.get_dummy_value()

    return types.void(types.int64, types.int64, types.float64), code


@intrinsic
def integer(typing: Any, array: Any, index: Any) -> Any:
    """Return integer `index` of an array of 64-bit integers."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return builder.load(_address(builder, args[0], args[1], 8, LONG))

    return types.int64(types.int64, types.int64), code


@intrinsic
def put_integer(typing: Any, array: Any, index: Any, value: Any) -> Any:
    """Write integer `index` of an array of 64-bit integers."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        builder.store(args[2], _address(builder, args[0], args[1], 8, LONG))
        return context.get_dummy_value()

    return types.void(types.int64, types.int64, types.int64), code
