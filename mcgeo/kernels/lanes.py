"""Eight walkers side by side: a vector type of eight lanes for compiled kernels.

A kernel written with these values advances eight walkers at once, one per lane. ``load`` and ``store`` move row
``i`` of a C-contiguous array of shape (n, 8); the operators + - * / & | ^ and comparisons act lane by lane. The
compiler maps a value to one register where the processor has registers of 512 bits, and to two or four smaller ones
where it has not: the same chain, only slower. With the compiler switched off (``NUMBA_DISABLE_JIT=1``) the same names
act on NumPy arrays of shape (8,).
"""

from __future__ import annotations

import math
import operator
from typing import Any

import numba
import numpy as np
from llvmlite import ir
from numba.core import cgutils, types
from numba.extending import intrinsic, models, overload, register_model

LANES = 8
_ALIGNMENT = 64


def aligned_zeros(shape: tuple[int, ...], dtype: type = np.float64) -> np.ndarray:
    """Zeros of an eight-byte type that start at a cache line: a row across two lines takes twice as long to load."""
    raw: np.ndarray = np.zeros(math.prod(shape) + _ALIGNMENT // 8, dtype=dtype)
    start = (-raw.ctypes.data % _ALIGNMENT) // 8
    return raw[start : start + math.prod(shape)].reshape(shape)


def aligned_copy(array: np.ndarray) -> np.ndarray:
    """Copy of an array of an eight-byte type that starts at a cache line."""
    copy = aligned_zeros(array.shape, array.dtype.type)
    copy[...] = array
    return copy


if numba.config.DISABLE_JIT:

    def splat(value: float) -> Any:
        return np.full(LANES, value)

    def splat_bits(value: int) -> Any:
        return np.full(LANES, value, dtype=np.uint64)

    def load(array: Any, row: int) -> Any:
        return array[row].copy()

    def store(array: Any, row: int, value: Any) -> None:
        array[row] = value

    def round_to_integer(value: Any) -> Any:
        return np.rint(value)

    def float_from_integer(value: Any) -> Any:
        return value.astype(np.int64).astype(np.float64)

    def integer_from_float(value: Any) -> Any:
        return value.astype(np.int64).astype(np.uint64)

    def float_from_bits(value: Any) -> Any:
        return value.view(np.float64)

    def bits_from_float(value: Any) -> Any:
        return value.view(np.uint64)

    def shift_left(value: Any, places: int) -> Any:
        return value << np.uint64(places)

    def shift_right(value: Any, places: int) -> Any:
        return value >> np.uint64(places)

    def select(mask: Any, first: Any, second: Any) -> Any:
        return np.where(mask, first, second)

else:

    class _LaneType(types.Type):
        def __init__(self, name: str, element: Any) -> None:
            super().__init__(name=name)
            self.element = element

    _FLOATS = _LaneType("mcgeo_float64_lanes", ir.DoubleType())
    _BITS = _LaneType("mcgeo_uint64_lanes", ir.IntType(64))
    _MASK = _LaneType("mcgeo_mask_lanes", ir.IntType(1))

    @register_model(_LaneType)
    class _LaneModel(models.PrimitiveModel):
        def __init__(self, manager: Any, frontend: Any) -> None:
            super().__init__(manager, frontend, ir.VectorType(frontend.element, LANES))

    def _vector(lane_type: _LaneType) -> Any:
        return ir.VectorType(lane_type.element, LANES)

    def _broadcast(builder: Any, scalar: Any, lane_type: _LaneType) -> Any:
        vector = builder.insert_element(
            ir.Constant(_vector(lane_type), ir.Undefined), scalar, ir.Constant(ir.IntType(32), 0)
        )
        zeros = ir.Constant(ir.VectorType(ir.IntType(32), LANES), [0] * LANES)
        return builder.shuffle_vector(vector, ir.Constant(_vector(lane_type), ir.Undefined), zeros)

    @intrinsic
    def splat(context: Any, value: Any) -> Any:
        def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
            scalar = context.cast(builder, args[0], signature.args[0], types.float64)
            return _broadcast(builder, scalar, _FLOATS)

        return _FLOATS(value), codegen

    @intrinsic
    def splat_bits(context: Any, value: Any) -> Any:
        def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
            scalar = context.cast(builder, args[0], signature.args[0], types.uint64)
            return _broadcast(builder, scalar, _BITS)

        return _BITS(value), codegen

    def _row_pointer(context: Any, builder: Any, array_type: Any, array: Any, row: Any, lane_type: Any) -> Any:
        data = context.make_array(array_type)(context, builder, array).data
        offset = builder.mul(row, ir.Constant(row.type, LANES))
        return builder.bitcast(builder.gep(data, [offset]), ir.PointerType(_vector(lane_type)))

    def _lane_type_of(array: Any) -> _LaneType:
        return _FLOATS if array.dtype == types.float64 else _BITS

    @intrinsic
    def load(context: Any, array: Any, row: Any) -> Any:
        lane_type = _lane_type_of(array)

        def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
            index = context.cast(builder, args[1], signature.args[1], types.intp)
            pointer = _row_pointer(context, builder, signature.args[0], args[0], index, lane_type)
            return builder.load(pointer, align=8)

        return lane_type(array, row), codegen

    @intrinsic
    def store(context: Any, array: Any, row: Any, value: Any) -> Any:
        def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
            index = context.cast(builder, args[1], signature.args[1], types.intp)
            pointer = _row_pointer(context, builder, signature.args[0], args[0], index, signature.args[2])
            builder.store(args[2], pointer, align=8)
            return context.get_dummy_value()

        return types.void(array, row, value), codegen

    def _unary(result: _LaneType, build: Any) -> Any:
        def definition(context: Any, value: Any) -> Any:
            def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
                return build(builder, args[0])

            return result(value), codegen

        return intrinsic(definition)

    def _round(builder: Any, value: Any) -> Any:
        signature = ir.FunctionType(_vector(_FLOATS), [_vector(_FLOATS)])
        function = cgutils.get_or_insert_function(builder.module, signature, f"llvm.rint.v{LANES}f64")
        return builder.call(function, [value])

    round_to_integer = _unary(_FLOATS, _round)
    float_from_integer = _unary(_FLOATS, lambda b, v: b.sitofp(v, _vector(_FLOATS)))
    integer_from_float = _unary(_BITS, lambda b, v: b.fptosi(v, _vector(_BITS)))
    float_from_bits = _unary(_FLOATS, lambda b, v: b.bitcast(v, _vector(_FLOATS)))
    bits_from_float = _unary(_BITS, lambda b, v: b.bitcast(v, _vector(_BITS)))

    def _shift(build: Any) -> Any:
        def definition(context: Any, value: Any, places: Any) -> Any:
            def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
                count = context.cast(builder, args[1], signature.args[1], types.uint64)
                return build(builder, args[0], _broadcast(builder, count, _BITS))

            return _BITS(value, places), codegen

        return intrinsic(definition)

    shift_left = _shift(lambda b, v, n: b.shl(v, n))
    shift_right = _shift(lambda b, v, n: b.lshr(v, n))

    @intrinsic
    def select(context: Any, mask: Any, first: Any, second: Any) -> Any:
        def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
            return builder.select(*args)

        return first(mask, first, second), codegen

    def _binary(result: _LaneType | None, build: Any) -> Any:
        def definition(context: Any, left: Any, right: Any) -> Any:
            def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
                return build(builder, *args)

            return (result or left)(left, right), codegen

        return intrinsic(definition)

    # "contract" lets the compiler fuse a product and a sum; nothing else is reordered.
    _FUSE = ("contract",)
    _float_operations = {
        operator.add: _binary(_FLOATS, lambda b, x, y: b.fadd(x, y, flags=_FUSE)),
        operator.sub: _binary(_FLOATS, lambda b, x, y: b.fsub(x, y, flags=_FUSE)),
        operator.mul: _binary(_FLOATS, lambda b, x, y: b.fmul(x, y, flags=_FUSE)),
        operator.truediv: _binary(_FLOATS, lambda b, x, y: b.fdiv(x, y)),
        operator.lt: _binary(_MASK, lambda b, x, y: b.fcmp_ordered("<", x, y)),
        operator.gt: _binary(_MASK, lambda b, x, y: b.fcmp_ordered(">", x, y)),
    }
    _bit_operations = {
        operator.add: _binary(_BITS, lambda b, x, y: b.add(x, y)),
        operator.sub: _binary(_BITS, lambda b, x, y: b.sub(x, y)),
        operator.and_: _binary(_BITS, lambda b, x, y: b.and_(x, y)),
        operator.or_: _binary(_BITS, lambda b, x, y: b.or_(x, y)),
        operator.xor: _binary(_BITS, lambda b, x, y: b.xor(x, y)),
    }

    def _register(symbol: Any) -> None:
        on_floats, on_bits = _float_operations.get(symbol), _bit_operations.get(symbol)

        def resolve(left: Any, right: Any) -> Any:
            if left is _FLOATS and right is _FLOATS and on_floats is not None:
                return lambda left, right: on_floats(left, right)
            if left is _FLOATS and isinstance(right, types.Number) and on_floats is not None:
                return lambda left, right: on_floats(left, splat(right))
            if isinstance(left, types.Number) and right is _FLOATS and on_floats is not None:
                return lambda left, right: on_floats(splat(left), right)
            if left is _BITS and right is _BITS and on_bits is not None:
                return lambda left, right: on_bits(left, right)
            return None

        # strict=False: the annotations of the two signatures differ.
        overload(symbol, strict=False)(resolve)

    for _symbol in {**_float_operations, **_bit_operations}:
        _register(_symbol)
