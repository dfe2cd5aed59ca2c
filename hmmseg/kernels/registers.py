"""Vectors of doubles as the compiler knows them: their type, and rows of arrays as vectors."""

from typing import Any

from llvmlite import ir
from numba.core import types
from numba.core.datamodel import models
from numba.extending import register_model

__all__ = ["DOUBLE", "INT64", "Row", "Vector", "columns_of", "constant", "index", "spread"]

DOUBLE = ir.DoubleType()
INT64 = ir.IntType(64)

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
        super().__init__(manager, kind, ir.VectorType(DOUBLE, kind.size))


def columns_of(size: int) -> types.UniTuple:
    """Return the type of as many vectors as each has elements."""
    return types.UniTuple(Vector(size), size)


def constant(size: int, value: float) -> ir.Constant:
    """Return a vector that holds a value in every element."""
    return ir.Constant(ir.VectorType(DOUBLE, size), [value] * size)


def spread(builder: ir.IRBuilder, value: ir.Value, size: int) -> ir.Value:
    """Return a vector whose elements all have one value.

    Parameters
    ----------
    builder
        Writes the code.
    value
        The value of every element.
    size
        Number of elements.
    """
    kind = ir.VectorType(value.type, size)
    first = builder.insert_element(ir.Constant(kind, ir.Undefined), value, index(0))
    mask = ir.Constant(ir.VectorType(ir.IntType(32), size), [0] * size)
    return builder.shuffle_vector(first, ir.Constant(kind, ir.Undefined), mask)


def index(number: int) -> ir.Constant:
    """Return the number of an element as a constant."""
    return ir.Constant(ir.IntType(32), number)


class Row:
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
        length = ir.Constant(INT64, size ** (kind.ndim - 1))
        self._first = builder.gep(array.data, [builder.mul(row, length)])
        self._builder = builder

    def _pointer(self, offset: int, kind: ir.Type) -> ir.Value:
        pointer = self._builder.gep(self._first, [index(offset)])
        return self._builder.bitcast(pointer, kind.as_pointer())

    def vector(self, offset: int, size: int) -> ir.Value:
        """Return the ``size`` values from ``offset`` on."""
        pointer = self._pointer(offset, ir.VectorType(DOUBLE, size))
        return self._builder.load(pointer, align=_ALIGNMENT)

    def spread(self, offset: int, size: int) -> ir.Value:
        """Return the value at ``offset``, ``size`` times."""
        value = self._builder.load(self._pointer(offset, DOUBLE), align=_ALIGNMENT)
        return spread(self._builder, value, size)

    def fill(self, offset: int, value: ir.Value) -> None:
        """Write the values of a vector from ``offset`` on."""
        self._builder.store(value, self._pointer(offset, value.type), align=_ALIGNMENT)
