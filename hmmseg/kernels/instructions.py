"""The functions of :mod:`hmmseg.kernels.vectors` as instructions for the compiler.

A vector is one value of LLVM's type ``<size x double>``; sums and products act on its elements.
Loops over states are written out here, while the code is made. No instruction carries a
fast-math flag, so the compiler may pack them but not change what they compute.
"""

from typing import Any

from llvmlite import ir
from numba.core import cgutils, types
from numba.core.datamodel import models
from numba.extending import intrinsic, register_model

from hmmseg.kernels.limits import SCALE_BITS, VANISHING

__all__ = [
    "Vector",
    "add_outer",
    "add_to",
    "identity",
    "inner",
    "item",
    "load",
    "plus",
    "product",
    "rescaled",
    "rescaled_and_counted",
    "rescaled_columns",
    "scaled",
    "step_columns",
    "store",
    "store_columns",
    "times_row",
]

_SCALE_SHIFT = SCALE_BITS.bit_length() - 1
_MANTISSA_BITS = 52
_BIAS = 1023
_DOUBLE = ir.DoubleType()
_INT64 = ir.IntType(64)
_ALIGNMENT = 8


class Vector(types.Type):
    """The compiler's type of a vector.

    Parameters
    ----------
    size
        Its number of doubles.
    """

    def __init__(self, size: int) -> None:
        self.size = size
        super().__init__(name=f"Vector({size})")


@register_model(Vector)
class _VectorModel(models.PrimitiveModel):  # type: ignore[misc, unused-ignore]
    def __init__(self, manager: Any, kind: Vector) -> None:
        super().__init__(manager, kind, ir.VectorType(_DOUBLE, kind.size))


def _columns_of(size: int) -> types.UniTuple:
    return types.UniTuple(Vector(size), size)


def _constant(size: int, value: float) -> ir.Constant:
    return ir.Constant(ir.VectorType(_DOUBLE, size), [value] * size)


def _spread(builder: ir.IRBuilder, value: ir.Value, size: int) -> ir.Value:
    """Return a vector whose elements all have one value."""
    kind = ir.VectorType(value.type, size)
    first = builder.insert_element(ir.Constant(kind, ir.Undefined), value, _index(0))
    mask = ir.Constant(ir.VectorType(ir.IntType(32), size), [0] * size)
    return builder.shuffle_vector(first, ir.Constant(kind, ir.Undefined), mask)


def _index(number: int) -> ir.Constant:
    return ir.Constant(ir.IntType(32), number)


class _Row:
    """Row ``at`` of float64[row, state], or the matrix ``at`` of float64[matrix, state, state].

    Arrays are contiguous, so that how far apart rows lie is a constant. Indices are not checked,
    and none counts from the end.
    """

    def __init__(
        self,
        context: Any,
        builder: ir.IRBuilder,
        signature: Any,
        arguments: Any,
        at: int,
        size: int,
    ) -> None:
        """Take the array from argument ``at - 1``, and from argument ``at`` which row it is."""
        kind = signature.args[at - 1]
        if kind.layout != "C":
            message = f"rows of a contiguous array are needed, not of {kind}"
            raise TypeError(message)
        array = context.make_array(kind)(context, builder, arguments[at - 1])
        row = context.cast(builder, arguments[at], signature.args[at], types.intp)
        length = ir.Constant(_INT64, size ** (kind.ndim - 1))
        self._first = builder.gep(array.data, [builder.mul(row, length)])
        self._builder = builder

    def _pointer(self, offset: int, kind: ir.Type) -> ir.Value:
        pointer = self._builder.gep(self._first, [_index(offset)])
        return self._builder.bitcast(pointer, kind.as_pointer())

    def vector(self, offset: int, size: int) -> ir.Value:
        """Return the ``size`` values from ``offset`` on."""
        pointer = self._pointer(offset, ir.VectorType(_DOUBLE, size))
        return self._builder.load(pointer, align=_ALIGNMENT)

    def spread(self, offset: int, size: int) -> ir.Value:
        """Return the value at ``offset``, ``size`` times."""
        value = self._builder.load(self._pointer(offset, _DOUBLE), align=_ALIGNMENT)
        return _spread(self._builder, value, size)

    def fill(self, offset: int, value: ir.Value) -> None:
        """Write the values of a vector from ``offset`` on."""
        self._builder.store(value, self._pointer(offset, value.type), align=_ALIGNMENT)


def _sum_of_products(builder: ir.IRBuilder, pairs: list[tuple[ir.Value, ir.Value]]) -> ir.Value:
    """Return the sum of products, from the first on."""
    total = builder.fmul(*pairs[0])
    for left, right in pairs[1:]:
        total = builder.fadd(total, builder.fmul(left, right))
    return total


@intrinsic
def item(typing, values, at):
    """Return one value of a flat array, by an index that never counts from the end."""

    def code(context, builder, signature, arguments):
        array = context.make_array(values)(context, builder, arguments[0])
        pointer = cgutils.get_item_pointer(
            context, builder, values, array, [arguments[1]], wraparound=False
        )
        return builder.load(pointer)

    return values.dtype(values, types.intp), code


@intrinsic(prefer_literal=True)
def load(typing, rows, at, size):
    """Return a row as a vector."""
    count = size.literal_value

    def code(context, builder, signature, arguments):
        return _Row(context, builder, signature, arguments, 1, count).vector(0, count)

    return Vector(count)(rows, at, size), code


@intrinsic
def store(typing, rows, at, vector):
    """Fill a row."""

    def code(context, builder, signature, arguments):
        _Row(context, builder, signature, arguments, 1, vector.size).fill(0, arguments[2])
        return context.get_dummy_value()

    return types.void(rows, at, vector), code


@intrinsic
def scaled(typing, vector, factor):
    """Return a vector times a number."""

    def code(context, builder, signature, arguments):
        return builder.fmul(arguments[0], _spread(builder, arguments[1], vector.size))

    return vector(vector, types.float64), code


@intrinsic
def times_row(typing, vector, rows, at):
    """Return the products of a vector's elements with those of a row."""

    def code(context, builder, signature, arguments):
        row = _Row(context, builder, signature, arguments, 2, vector.size)
        return builder.fmul(row.vector(0, vector.size), arguments[0])

    return vector(vector, rows, at), code


@intrinsic
def plus(typing, vector, other):
    """Return the sum of two vectors."""

    def code(context, builder, signature, arguments):
        return builder.fadd(*arguments)

    return vector(vector, other), code


@intrinsic
def inner(typing, rows, at, vector):
    """Return the sum of a row's elements times those of a vector."""
    size = vector.size

    def code(context, builder, signature, arguments):
        row = _Row(context, builder, signature, arguments, 1, size).vector(0, size)
        products = builder.fmul(row, arguments[2])
        total = builder.extract_element(products, _index(0))
        for k in range(1, size):
            total = builder.fadd(total, builder.extract_element(products, _index(k)))
        return total

    return types.float64(rows, at, vector), code


@intrinsic
def product(typing, vector, matrices, token):
    """Return a vector times a matrix."""
    size = vector.size

    def code(context, builder, signature, arguments):
        matrix = _Row(context, builder, signature, arguments, 2, size)
        return _sum_of_products(
            builder,
            [
                (
                    _spread(builder, builder.extract_element(arguments[0], _index(k)), size),
                    matrix.vector(k * size, size),
                )
                for k in range(size)
            ],
        )

    return vector(vector, matrices, token), code


@intrinsic
def add_outer(typing, weights, token, rows, at, vector):
    """Add a column times a row to a matrix."""
    size = vector.size

    def code(context, builder, signature, arguments):
        matrix = _Row(context, builder, signature, arguments, 1, size)
        column = _Row(context, builder, signature, arguments, 3, size)
        for i in range(size):
            more = builder.fmul(column.spread(i, size), arguments[4])
            matrix.fill(i * size, builder.fadd(matrix.vector(i * size, size), more))
        return context.get_dummy_value()

    return types.void(weights, token, rows, at, vector), code


@intrinsic
def add_to(typing, rows, at, vector):
    """Add a vector to a row."""
    size = vector.size

    def code(context, builder, signature, arguments):
        row = _Row(context, builder, signature, arguments, 1, size)
        row.fill(0, builder.fadd(row.vector(0, size), arguments[2]))
        return context.get_dummy_value()

    return types.void(rows, at, vector), code


@intrinsic(prefer_literal=True)
def identity(typing, size):
    """Return the columns of the identity."""
    count = size.literal_value

    def code(context, builder, signature, arguments):
        columns = [
            ir.Constant(ir.VectorType(_DOUBLE, count), [float(i == j) for i in range(count)])
            for j in range(count)
        ]
        return context.make_tuple(builder, signature.return_type, columns)

    return _columns_of(count)(size), code


@intrinsic
def step_columns(typing, columns, matrices, token):
    """Return the columns of a matrix times a matrix."""
    size = columns.count

    def code(context, builder, signature, arguments):
        matrix = _Row(context, builder, signature, arguments, 2, size)
        old = cgutils.unpack_tuple(builder, arguments[0], size)
        new = [
            _sum_of_products(
                builder, [(old[k], matrix.spread(k * size + j, size)) for k in range(size)]
            )
            for j in range(size)
        ]
        return context.make_tuple(builder, signature.return_type, new)

    return columns(columns, matrices, token), code


@intrinsic
def store_columns(typing, matrices, at, columns):
    """Fill a matrix from its columns."""
    size = columns.count

    def code(context, builder, signature, arguments):
        matrix = _Row(context, builder, signature, arguments, 1, size)
        for j, column in enumerate(cgutils.unpack_tuple(builder, arguments[2], size)):
            for i in range(size):
                matrix.fill(i * size + j, builder.extract_element(column, _index(i)))
        return context.get_dummy_value()

    return types.void(matrices, at, columns), code


def _larger(builder: ir.IRBuilder, one: ir.Value, other: ir.Value) -> ir.Value:
    return builder.select(builder.fcmp_ordered(">", other, one), other, one)


def _scaling(builder: ir.IRBuilder, largest: ir.Value) -> tuple[ir.Value, ir.Value]:
    """Return powers of 2**64 and their exponents, read off the bits of a vector.

    A double's exponent stands above its 52 bits of mantissa, with 1023 added.
    """
    size = largest.type.count
    integers = ir.VectorType(_INT64, size)

    def number(value: int) -> ir.Constant:
        return ir.Constant(integers, [value] * size)

    exponent = builder.lshr(builder.bitcast(largest, integers), number(_MANTISSA_BITS))
    counts = builder.ashr(builder.sub(number(_BIAS), exponent), number(_SCALE_SHIFT))
    counts = builder.select(
        builder.fcmp_ordered(">", largest, _constant(size, 0.0)), counts, number(0)
    )
    powers = builder.add(builder.shl(counts, number(_SCALE_SHIFT)), number(_BIAS))
    factors = builder.bitcast(builder.shl(powers, number(_MANTISSA_BITS)), largest.type)
    return factors, builder.sitofp(counts, largest.type)


def _rescale(builder: ir.IRBuilder, vectors: list[ir.Value], largest: ir.Value) -> tuple[Any, ...]:
    """Return scaled vectors, the exponents, and whether a value nearly vanished."""
    size = largest.type.count
    factors, counts = _scaling(builder, largest)
    new = [builder.fmul(vector, factors) for vector in vectors]
    vanishing = ir.Constant(ir.VectorType(ir.IntType(1), size), [0] * size)
    for vector in new:
        some = builder.fcmp_ordered(">", vector, _constant(size, 0.0))
        small = builder.fcmp_ordered("<", vector, _constant(size, VANISHING))
        vanishing = builder.or_(vanishing, builder.and_(some, small))
    found = builder.extract_element(vanishing, _index(0))
    for k in range(1, size):
        found = builder.or_(found, builder.extract_element(vanishing, _index(k)))
    return new, counts, found


def _largest_element(builder: ir.IRBuilder, vector: ir.Value) -> ir.Value:
    """Return the largest element, as a vector."""
    size = vector.type.count
    largest = builder.extract_element(vector, _index(0))
    for k in range(1, size):
        largest = _larger(builder, largest, builder.extract_element(vector, _index(k)))
    return _spread(builder, largest, size)


@intrinsic
def rescaled(typing, vector):
    """Return a vector with its largest value brought near 1."""

    def code(context, builder, signature, arguments):
        factors, _ = _scaling(builder, _largest_element(builder, arguments[0]))
        return builder.fmul(arguments[0], factors)

    return vector(vector), code


@intrinsic
def rescaled_and_counted(typing, vector):
    """Return a vector with its largest value brought near 1, and what was done."""

    def code(context, builder, signature, arguments):
        largest = _largest_element(builder, arguments[0])
        new, counts, found = _rescale(builder, [arguments[0]], largest)
        return context.make_tuple(builder, signature.return_type, [new[0], counts, found])

    return types.Tuple((vector, vector, types.boolean))(vector), code


@intrinsic
def rescaled_columns(typing, columns):
    """Return columns with the largest value of every row brought near 1, and what was done."""
    size = columns.count

    def code(context, builder, signature, arguments):
        old = cgutils.unpack_tuple(builder, arguments[0], size)
        largest = old[0]
        for column in old[1:]:
            largest = _larger(builder, largest, column)
        new, counts, found = _rescale(builder, old, largest)
        items = [context.make_tuple(builder, columns, new), counts, found]
        return context.make_tuple(builder, signature.return_type, items)

    return types.Tuple((columns, Vector(size), types.boolean))(columns), code
