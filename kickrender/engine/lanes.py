"""Lane vectors: a few floats that are computed with as one, whatever the processor's own width.

Hits of one topology are solved side by side. Every quantity then has one float per lane, and a kernel reads and
writes them as one value of type `Lanes`: `load(array, start, width)` takes `len(width)` neighbouring floats,
`+ - * /` work lane by lane, `store` puts them back; `gather` takes floats from anywhere. `width` is a tuple whose
length is the number of lanes, so that the compiler knows it and one source serves one lane and many. Each lane's
arithmetic is plain IEEE 754 double precision in the order written: a lane's bits never depend on its neighbours or
on the width.

The compiler would not do this by itself: it cannot prove that the arrays do not overlap. With numba's compiler
switched off the same functions work on numpy arrays of shape (lanes,).
"""

from __future__ import annotations

import operator
from typing import Any

import numpy as np
from llvmlite import ir
from numba.core import config, types
from numba.extending import intrinsic, lower_builtin, models, register_model, type_callable

LONE = (0,)
FLAT = (0,) * 8  # width for passes over whole arrays, whose length is padded to a multiple of it
PADDING = len(FLAT)


class Lanes(types.Type):
    """The compiled type of `count` floats."""

    def __init__(self, count: int) -> None:
        self.count = count
        super().__init__(name=f"Lanes({count})")


@register_model(Lanes)
class _LanesModel(models.PrimitiveModel):
    def __init__(self, manager: Any, lanes: Lanes) -> None:
        super().__init__(manager, lanes, _llvm_type(lanes.count))


def _llvm_type(count: int) -> ir.Type:
    return ir.VectorType(ir.DoubleType(), count)


def _address(context: Any, builder: Any, array_type: Any, array: Any, index_type: Any, index: Any, count: int) -> Any:
    data = context.make_array(array_type)(context, builder, array).data
    start = context.cast(builder, index, index_type, types.intp)
    return builder.bitcast(builder.gep(data, [start]), _llvm_type(count).as_pointer())


def _spread(builder: Any, value: Any, value_type: Any, count: int) -> Any:
    if isinstance(value_type, Lanes):
        return value
    nothing = ir.Constant(_llvm_type(count), ir.Undefined)
    first = builder.insert_element(nothing, value, ir.Constant(ir.IntType(32), 0))
    mask = ir.Constant(ir.VectorType(ir.IntType(32), count), [0] * count)
    return builder.shuffle_vector(first, nothing, mask)


@intrinsic
def _load(typing: Any, array: Any, start: Any, width: Any) -> Any:
    lanes = Lanes(width.count)

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        address = _address(context, builder, array, arguments[0], signature.args[1], arguments[1], lanes.count)
        return builder.load(address, align=8)

    return lanes(array, start, width), generate


@intrinsic
def _store(typing: Any, array: Any, start: Any, value: Any) -> Any:
    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        address = _address(context, builder, array, arguments[0], signature.args[1], arguments[1], value.count)
        builder.store(arguments[2], address, align=8)
        return context.get_dummy_value()

    return types.void(array, start, value), generate


@intrinsic
def _gather(typing: Any, array: Any, indices: Any, start: Any, width: Any) -> Any:
    lanes = Lanes(width.count)

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        data = context.make_array(array)(context, builder, arguments[0]).data
        places = context.make_array(indices)(context, builder, arguments[1]).data
        first = context.cast(builder, arguments[2], signature.args[2], types.intp)
        value = ir.Constant(_llvm_type(lanes.count), ir.Undefined)
        for lane in range(lanes.count):
            place = builder.load(builder.gep(places, [builder.add(first, ir.Constant(ir.IntType(64), lane))]))
            element = builder.load(builder.gep(data, [builder.zext(place, ir.IntType(64))]))
            value = builder.insert_element(value, element, ir.Constant(ir.IntType(32), lane))
        return value

    return lanes(array, indices, start, width), generate


@intrinsic
def _spread_float(typing: Any, value: Any, width: Any) -> Any:
    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        return _spread(builder, arguments[0], value, width.count)

    return Lanes(width.count)(value, width), generate


@intrinsic
def _pick_less(typing: Any, a: Any, b: Any, yes: Any, no: Any) -> Any:
    lanes = next(kind for kind in (a, b, yes, no) if isinstance(kind, Lanes))

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        a_, b_, yes_, no_ = (
            _spread(builder, value, kind, lanes.count) for value, kind in zip(arguments, signature.args, strict=True)
        )
        return builder.select(builder.fcmp_ordered("<", a_, b_), yes_, no_)

    return lanes(a, b, yes, no), generate


@intrinsic
def _any_less(typing: Any, a: Any, b: Any) -> Any:
    lanes = next(kind for kind in (a, b) if isinstance(kind, Lanes))

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        a_, b_ = (
            _spread(builder, value, kind, lanes.count) for value, kind in zip(arguments, signature.args, strict=True)
        )
        mask = builder.bitcast(builder.fcmp_unordered("<", a_, b_), ir.IntType(lanes.count))
        return builder.icmp_unsigned("!=", mask, ir.Constant(ir.IntType(lanes.count), 0))

    return types.boolean(a, b), generate


def _bitwise(name: str, recipe: Any) -> Any:
    """An intrinsic on the bits of a lane vector."""

    @intrinsic
    def bitwise(typing: Any, value: Any) -> Any:
        def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
            whole = ir.VectorType(ir.IntType(64), value.count)

            def constant(number: int) -> Any:
                return ir.Constant(whole, [number] * value.count)

            return recipe(builder, builder.bitcast(arguments[0], whole), constant, _llvm_type(value.count))

        return value(value), generate

    bitwise.__name__ = name
    return bitwise


# 2^k from k + 1.5 * 2^52: the low bits of that sum are k in two's complement
_power_of_two = _bitwise(
    "power_of_two",
    lambda builder, bits, constant, floats: builder.bitcast(
        builder.add(builder.shl(bits, constant(52)), constant(1023 << 52)), floats
    ),
)
# the mantissa of a normal positive number, in [1, 2)
_mantissa = _bitwise(
    "mantissa",
    lambda builder, bits, constant, floats: builder.bitcast(
        builder.or_(builder.and_(bits, constant((1 << 52) - 1)), constant(1023 << 52)), floats
    ),
)
# its exponent as a float
_exponent = _bitwise(
    "exponent",
    lambda builder, bits, constant, floats: builder.sitofp(
        builder.sub(builder.lshr(bits, constant(52)), constant(1023)), floats
    ),
)


def _lower_operator(operation: Any, instruction: str) -> None:
    @type_callable(operation)
    def type_of(context: Any) -> Any:
        def typer(a: Any, b: Any) -> Any:
            if isinstance(a, Lanes) and (a == b or b == types.float64):
                return a
            if isinstance(b, Lanes) and a == types.float64:
                return b
            return None

        return typer

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        count = signature.return_type.count
        a, b = (_spread(builder, value, kind, count) for value, kind in zip(arguments, signature.args, strict=True))
        return getattr(builder, instruction)(a, b)

    for pair in ((Lanes, Lanes), (Lanes, types.Float), (types.Float, Lanes)):
        lower_builtin(operation, *pair)(generate)


for _operation, _instruction in (
    (operator.add, "fadd"),
    (operator.sub, "fsub"),
    (operator.mul, "fmul"),
    (operator.truediv, "fdiv"),
):
    _lower_operator(_operation, _instruction)


def _plain_load(array: Any, start: int, width: tuple[int, ...]) -> Any:
    assert 0 <= start and int(start) + len(width) <= array.size
    return array[int(start) : int(start) + len(width)].copy()


def _plain_store(array: Any, start: int, value: Any) -> None:
    assert 0 <= start and int(start) + value.size <= array.size
    array[int(start) : int(start) + value.size] = value


def _plain_gather(array: Any, indices: Any, start: int, width: tuple[int, ...]) -> Any:
    return array[indices[int(start) : int(start) + len(width)]]


def _plain_power_of_two(shifted: Any) -> Any:
    return ((shifted.view(np.int64) << 52) + (1023 << 52)).view(np.float64)


def _plain_mantissa(value: Any) -> Any:
    return ((value.view(np.int64) & ((1 << 52) - 1)) | (1023 << 52)).view(np.float64)


def _plain_exponent(value: Any) -> Any:
    return ((value.view(np.int64) >> 52) - 1023).astype(np.float64)


if config.DISABLE_JIT:
    load, store, gather = _plain_load, _plain_store, _plain_gather
    power_of_two, mantissa, exponent = _plain_power_of_two, _plain_mantissa, _plain_exponent

    def spread(value: float, width: tuple[int, ...]) -> Any:
        """`value` in every lane."""
        return np.full(len(width), value)

    def pick_less(a: Any, b: Any, yes: Any, no: Any) -> Any:
        """Lane by lane: `yes` where a < b, else `no` (also where either is not a number)."""
        return np.where(a < b, yes, no)

    def any_less(a: Any, b: Any) -> Any:
        """Whether a < b in any lane, or either is not a number there."""
        return bool(np.any(~(a >= b)))

else:
    load, store, gather, spread = _load, _store, _gather, _spread_float
    pick_less, any_less = _pick_less, _any_less
    power_of_two, mantissa, exponent = _power_of_two, _mantissa, _exponent
