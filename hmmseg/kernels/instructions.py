"""The functions of :mod:`hmmseg.kernels.vectors` as instructions for the compiler.

A vector is one value of LLVM's type ``<size x double>``; sums and products act on its elements.
Loops over states are written out here, while the code is made. No instruction carries a
fast-math flag, so the compiler may pack them but not change what they compute.
"""

from typing import Any

from llvmlite import ir
from numba.core import cgutils, types
from numba.extending import intrinsic

from hmmseg.kernels.limits import SCALE_BITS, VANISHING
from hmmseg.kernels.registers import (
    DOUBLE,
    INT64,
    Row,
    Vector,
    columns_of,
    constant,
    index,
    spread,
)

__all__ = [
    "Vector"
]  # the functions are for use through hmmseg.kernels.vectors, which explains them

_SCALE_SHIFT = SCALE_BITS.bit_length() - 1
_MANTISSA_BITS = 52
_BIAS = 1023


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
        return Row(context, builder, signature, arguments, 1, count).vector(0, count)

    return Vector(count)(rows, at, size), code


@intrinsic
def store(typing, rows, at, vector):
    """Fill a row."""

    def code(context, builder, signature, arguments):
        Row(context, builder, signature, arguments, 1, vector.size).fill(0, arguments[2])
        return context.get_dummy_value()

    return types.void(rows, at, vector), code


@intrinsic
def scaled(typing, vector, factor):
    """Return a vector times a number."""

    def code(context, builder, signature, arguments):
        return builder.fmul(arguments[0], spread(builder, arguments[1], vector.size))

    return vector(vector, types.float64), code


@intrinsic
def times_row(typing, vector, rows, at):
    """Return the products of a vector's elements with those of a row."""

    def code(context, builder, signature, arguments):
        row = Row(context, builder, signature, arguments, 2, vector.size)
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
        row = Row(context, builder, signature, arguments, 1, size).vector(0, size)
        products = builder.fmul(row, arguments[2])
        total = builder.extract_element(products, index(0))
        for k in range(1, size):
            total = builder.fadd(total, builder.extract_element(products, index(k)))
        return total

    return types.float64(rows, at, vector), code


@intrinsic
def product(typing, vector, matrices, token):
    """Return a vector times a matrix."""
    size = vector.size

    def code(context, builder, signature, arguments):
        matrix = Row(context, builder, signature, arguments, 2, size)
        return _sum_of_products(
            builder,
            [
                (
                    spread(builder, builder.extract_element(arguments[0], index(k)), size),
                    matrix.vector(k * size, size),
                )
                for k in range(size)
            ],
        )

    return vector(vector, matrices, token), code


@intrinsic
def add_outer(typing, weights, token, rows, at, vector):
    """Add a column times a row to a matrix.

    Parameters
    ----------
    weights, token, rows, at, vector
        As of the function of this name in :mod:`hmmseg.kernels.vectors`.
    """
    size = vector.size

    def code(context, builder, signature, arguments):
        matrix = Row(context, builder, signature, arguments, 1, size)
        column = Row(context, builder, signature, arguments, 3, size)
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
        row = Row(context, builder, signature, arguments, 1, size)
        row.fill(0, builder.fadd(row.vector(0, size), arguments[2]))
        return context.get_dummy_value()

    return types.void(rows, at, vector), code


@intrinsic(prefer_literal=True)
def identity(typing, size):
    """Return the columns of the identity."""
    count = size.literal_value

    def code(context, builder, signature, arguments):
        columns = [
            ir.Constant(ir.VectorType(DOUBLE, count), [float(i == j) for i in range(count)])
            for j in range(count)
        ]
        return context.make_tuple(builder, signature.return_type, columns)

    return columns_of(count)(size), code


@intrinsic
def step_columns(typing, columns, matrices, token):
    """Return the columns of a matrix times a matrix."""
    size = columns.count

    def code(context, builder, signature, arguments):
        matrix = Row(context, builder, signature, arguments, 2, size)
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
        matrix = Row(context, builder, signature, arguments, 1, size)
        for j, column in enumerate(cgutils.unpack_tuple(builder, arguments[2], size)):
            for i in range(size):
                matrix.fill(i * size + j, builder.extract_element(column, index(i)))
        return context.get_dummy_value()

    return types.void(matrices, at, columns), code


def _larger(builder: ir.IRBuilder, one: ir.Value, other: ir.Value) -> ir.Value:
    return builder.select(builder.fcmp_ordered(">", other, one), other, one)


def _scaling(builder: ir.IRBuilder, largest: ir.Value) -> tuple[ir.Value, ir.Value]:
    """Return powers of 2**64 and their exponents, read off the bits of a vector.

    A double's exponent stands above its 52 bits of mantissa, with 1023 added.
    """
    size = largest.type.count
    integers = ir.VectorType(INT64, size)

    def number(value: int) -> ir.Constant:
        return ir.Constant(integers, [value] * size)

    exponent = builder.lshr(builder.bitcast(largest, integers), number(_MANTISSA_BITS))
    counts = builder.ashr(builder.sub(number(_BIAS), exponent), number(_SCALE_SHIFT))
    counts = builder.select(
        builder.fcmp_ordered(">", largest, constant(size, 0.0)), counts, number(0)
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
        some = builder.fcmp_ordered(">", vector, constant(size, 0.0))
        small = builder.fcmp_ordered("<", vector, constant(size, VANISHING))
        vanishing = builder.or_(vanishing, builder.and_(some, small))
    found = builder.extract_element(vanishing, index(0))
    for k in range(1, size):
        found = builder.or_(found, builder.extract_element(vanishing, index(k)))
    return new, counts, found


def _largest_element(builder: ir.IRBuilder, vector: ir.Value) -> ir.Value:
    """Return the largest element, as a vector."""
    size = vector.type.count
    largest = builder.extract_element(vector, index(0))
    for k in range(1, size):
        largest = _larger(builder, largest, builder.extract_element(vector, index(k)))
    return spread(builder, largest, size)


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
