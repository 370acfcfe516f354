# mypy: disable-error-code="untyped-decorator, no-untyped-call, unused-ignore"
"""A numba value type over LLVM vectors: LANES doubles that behave like one number.

A kernel written with it reads like scalar code with operators and is vector code by construction: arithmetic, comparisons
that give a mask, and a choice by mask instead of a branch.
"""

import operator
from typing import Any

import numba
from llvmlite import ir
from numba.core import types
from numba.core.typing.templates import ConcreteTemplate, signature
from numba.core.typing.templates import infer_global as typed_for
from numba.extending import intrinsic as _declared
from numba.extending import lower_builtin, models, register_model

from sweep.kernel.layout import LANES

intrinsic: Any = _declared  # its type counts the typing context as an argument that callers would have to give


DOUBLE = ir.DoubleType()
LONG = ir.IntType(64)
DOUBLES = ir.VectorType(DOUBLE, LANES)
_LONGS = ir.VectorType(LONG, LANES)
_BITS = ir.VectorType(ir.IntType(1), LANES)
_FLAGS = ("contract", "nsz")  # never nnan or reassoc: they break the guards and the exponent tricks

OPTIONS: dict[str, Any] = {
    "nogil": True, "error_model": "numpy", "fastmath": {"contract", "nsz"},
    "no_cpython_wrapper": True, "no_cfunc_wrapper": True,  # Python calls the object file alone; wrappers are a fifth of compiling
}  # fmt: skip


def compiled(function: Any) -> Any:
    """Compile a kernel function with the options every kernel function shares."""
    return numba.njit(**OPTIONS)(function)


class VectorType(types.Type):  # type: ignore[misc]
    """LANES doubles."""

    def __init__(self) -> None:
        super().__init__(name=f"Vector{LANES}")


class MaskType(types.Type):  # type: ignore[misc]
    """LANES truth values."""

    def __init__(self) -> None:
        super().__init__(name=f"Mask{LANES}")


vector = VectorType()
mask = MaskType()


@register_model(VectorType)
class _VectorModel(models.PrimitiveModel):  # type: ignore[misc]
    def __init__(self, manager: Any, kind: Any) -> None:
        super().__init__(manager, kind, DOUBLES)


@register_model(MaskType)
class _MaskModel(models.PrimitiveModel):  # type: ignore[misc]
    def __init__(self, manager: Any, kind: Any) -> None:
        super().__init__(manager, kind, _BITS)


def widened(builder: Any, value: Any) -> Any:
    """Return a scalar double in every lane; a vector passes through."""
    if value.type == DOUBLES:
        return value
    one = builder.insert_element(ir.Constant(DOUBLES, ir.Undefined), value, ir.Constant(ir.IntType(32), 0))
    order = ir.Constant(ir.VectorType(ir.IntType(32), LANES), [0] * LANES)
    return builder.shuffle_vector(one, ir.Constant(DOUBLES, ir.Undefined), order)


_PAIRS = ((vector, vector), (vector, types.float64), (types.float64, vector))


def _binary(function: Any, result: Any, build: Any) -> None:
    """Teach numba a binary operator over vectors, either side of which may be a scalar double."""

    class Cases(ConcreteTemplate):  # type: ignore[misc]
        cases = tuple(signature(result, *pair) for pair in _PAIRS)

    typed_for(function)(Cases)

    def lower(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return build(builder, widened(builder, args[0]), widened(builder, args[1]))

    for pair in _PAIRS:
        lower_builtin(function, *(type(p) if p is vector else p for p in pair))(lower)


def _arithmetic(name: str) -> Any:
    return lambda builder, a, b: getattr(builder, name)(a, b, flags=_FLAGS)


def _comparison(sign: str) -> Any:
    return lambda builder, a, b: builder.fcmp_ordered(sign, a, b)


for _function, _name in ((operator.add, "fadd"), (operator.sub, "fsub"), (operator.mul, "fmul"), (operator.truediv, "fdiv")):
    _binary(_function, vector, _arithmetic(_name))
for _function, _sign in ((operator.lt, "<"), (operator.le, "<="), (operator.gt, ">"), (operator.ge, ">=")):
    _binary(_function, mask, _comparison(_sign))


@typed_for(operator.neg)
class _Negated(ConcreteTemplate):  # type: ignore[misc]
    cases = (signature(vector, vector),)


@lower_builtin(operator.neg, VectorType)
def _negate(context: Any, builder: Any, sig: Any, args: Any) -> Any:
    return builder.fneg(args[0])


@typed_for(operator.and_)
@typed_for(operator.or_)
class _Joined(ConcreteTemplate):  # type: ignore[misc]
    cases = (signature(mask, mask, mask),)


@lower_builtin(operator.and_, MaskType, MaskType)
def _both(context: Any, builder: Any, sig: Any, args: Any) -> Any:
    return builder.and_(*args)


@lower_builtin(operator.or_, MaskType, MaskType)
def _either(context: Any, builder: Any, sig: Any, args: Any) -> Any:
    return builder.or_(*args)


@typed_for(operator.invert)
class _Inverted(ConcreteTemplate):  # type: ignore[misc]
    cases = (signature(mask, mask),)


@lower_builtin(operator.invert, MaskType)
def _invert(context: Any, builder: Any, sig: Any, args: Any) -> Any:
    return builder.not_(args[0])


@intrinsic
def spread(typing: Any, value: Any) -> Any:
    """Return a scalar double in every lane."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return widened(builder, args[0])

    return vector(types.float64), code


@intrinsic
def where(typing: Any, condition: Any, a: Any, b: Any) -> Any:
    """Return `a` in the lanes where the mask is set, else `b`; either may be a scalar double."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return builder.select(args[0], widened(builder, args[1]), widened(builder, args[2]))

    kinds = [vector if isinstance(side, VectorType) else types.float64 for side in (a, b)]
    return vector(mask, *kinds), code


@intrinsic
def bits(typing: Any, condition: Any) -> Any:
    """Return a mask as an integer, lane 0 in the lowest bit."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return builder.zext(builder.bitcast(args[0], ir.IntType(LANES)), LONG)

    return types.int64(mask), code


@intrinsic
def mask_of(typing: Any, flags: Any) -> Any:
    """Return the mask whose lanes are the lowest bits of an integer."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return builder.bitcast(builder.trunc(args[0], ir.IntType(LANES)), _BITS)

    return mask(types.int64), code


@intrinsic
def lowest(typing: Any, flags: Any) -> Any:
    """Return the place of the lowest bit that is set."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        return builder.cttz(args[0], ir.Constant(ir.IntType(1), 1))

    return types.int64(types.int64), code


def _called(name: str) -> Any:
    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        kind = ir.FunctionType(DOUBLES, [DOUBLES])
        function = builder.module.globals.get(name) or ir.Function(builder.module, kind, name)
        return builder.call(function, args)

    return code


@intrinsic
def root(typing: Any, value: Any) -> Any:
    """Return the square root, lane by lane."""
    return vector(vector), _called(f"llvm.sqrt.v{LANES}f64")


@intrinsic
def size(typing: Any, value: Any) -> Any:
    """Return the absolute value, lane by lane."""
    return vector(vector), _called(f"llvm.fabs.v{LANES}f64")


def _longs(values: int) -> Any:
    return ir.Constant(_LONGS, [values] * LANES)


@intrinsic
def scaled(typing: Any, value: Any, shifted: Any) -> Any:
    """Return `value` times 2**n, where n stands in the low bits of `shifted` = n + 1.5 * 2**52."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        power = builder.shl(builder.bitcast(args[1], _LONGS), _longs(52))
        return builder.bitcast(builder.add(builder.bitcast(args[0], _LONGS), power), DOUBLES)

    return vector(vector, vector), code


@intrinsic
def exponent(typing: Any, value: Any) -> Any:
    """Return the binary exponent of a positive normal number, as a double."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        field = builder.lshr(builder.bitcast(args[0], _LONGS), _longs(52))
        whole = builder.bitcast(builder.or_(field, _longs(0x4330000000000000)), DOUBLES)
        return builder.fsub(whole, ir.Constant(DOUBLES, [2.0**52 + 1023.0] * LANES))

    return vector(vector), code


@intrinsic
def mantissa(typing: Any, value: Any) -> Any:
    """Return the mantissa, from 1 to 2, of a positive normal number."""

    def code(context: Any, builder: Any, sig: Any, args: Any) -> Any:
        fraction = builder.and_(builder.bitcast(args[0], _LONGS), _longs(0x000FFFFFFFFFFFFF))
        return builder.bitcast(builder.or_(fraction, _longs(0x3FF0000000000000)), DOUBLES)

    return vector(vector), code
