"""Vectors of LANES numbers as values inside kernels: one line of code computes all lanes at once.

Inside compiled code a vector behaves like a number: + - * / and comparisons work lane by lane, a
plain number beside one counts for every lane, and ``max``, ``min``, ``abs``, ``math.sqrt`` and
``math.floor`` take them. So one and the same formula runs over numbers and over lanes, provided
that it chooses by ``where``, not by ``if``. The compiler makes each operation a few vector
instructions, of whatever width the processor has; nothing depends on a loop being recognised.

Three kinds: single (float32), wide (float64) and whole (int32); comparisons give masks. They live
in local variables; ``load`` and ``store`` move them from and to flat arrays. The functions
here exist in compiled code only, but for ``where``.
"""

import math
import operator
from collections.abc import Callable
from typing import Any

import numpy as np
from llvmlite import ir
from numba import types
from numba.core import cgutils
from numba.core.imputils import lower_builtin, lower_cast
from numba.core.typeconv import Conversion
from numba.core.typing.templates import AbstractTemplate, infer_global, signature
from numba.extending import intrinsic, models, overload, register_model

LANES = 32
_INT = ir.IntType(32)


class LaneType(types.Type):
    """The type of a vector; ``element`` is the type of the numbers in it."""

    def __init__(self, element: Any, code: Any) -> None:
        self.element = element
        self.vector = ir.VectorType(code, LANES)
        self.suffix = f"v{LANES}f{code.intrinsic_name[1:]}" if element in types.real_domain else ""
        super().__init__(name=f"lanes_of_{element}")

    def can_convert_from(self, typing_context: Any, other: Any) -> Any:
        """A number may stand for a vector of equal ones."""
        kinds = types.Integer if self.element in types.integer_domain else types.Number
        if self is not MASK and isinstance(other, kinds):
            return Conversion.safe
        return None


SINGLE = LaneType(types.float32, ir.FloatType())
WIDE = LaneType(types.float64, ir.DoubleType())
WHOLE = LaneType(types.int32, _INT)
MASK = LaneType(types.boolean, ir.IntType(1))
_REAL = (SINGLE, WIDE)
_OF_ELEMENT = {kind.element: kind for kind in (SINGLE, WIDE, WHOLE)}


@register_model(LaneType)
class _LaneModel(models.PrimitiveModel):
    def __init__(self, manager: Any, kind: Any) -> None:
        super().__init__(manager, kind, kind.vector)


def _spread(builder: Any, number: Any, vector: Any) -> Any:
    nothing = ir.Constant(vector, ir.Undefined)
    first = builder.insert_element(nothing, number, ir.Constant(_INT, 0))
    return builder.shuffle_vector(first, nothing, ir.Constant(ir.VectorType(_INT, LANES), None))


def _cast(context: Any, builder: Any, given: Any, wanted: Any, value: Any) -> Any:
    if isinstance(given, types.Literal):
        value = context.cast(builder, value, given, given.literal_type)
        given = given.literal_type
    return _spread(builder, context.cast(builder, value, given, wanted.element), wanted.vector)


for _kind in (SINGLE, WIDE, WHOLE):
    for _number in (types.Float, types.Integer, types.IntegerLiteral):
        lower_cast(_number, _kind)(_cast)


def _define(
    function: Any,
    kinds: tuple[LaneType, ...],
    emit: Callable[[Any, LaneType, Any], Any],
    result: LaneType | None = None,
) -> None:
    """Let ``function`` take lanes of the given kinds; ``emit`` writes its instructions."""

    class Template(AbstractTemplate):
        key = function

        def generic(self, arguments: Any, keywords: Any) -> Any:
            for kind in kinds:
                if kind in arguments and not keywords:
                    if all(self._fits(kind, argument) for argument in arguments):
                        return signature(result or kind, *[kind] * len(arguments))
                    return None
            return None

        def _fits(self, kind: LaneType, argument: Any) -> bool:
            return self.context.can_convert(argument, kind) is not None

    infer_global(function)(Template)
    for kind in kinds:
        for count in (1, 2):

            def write(context: Any, builder: Any, sig: Any, values: Any, kind: Any = kind) -> Any:
                return emit(builder, kind, values)

            lower_builtin(function, *[kind] * count)(write)


def _by_kind(real: str, whole: str) -> Callable[[Any, LaneType, Any], Any]:
    def emit(builder: Any, kind: LaneType, values: Any) -> Any:
        return getattr(builder, real if kind in _REAL else whole)(*values)

    return emit


def _compare(builder: Any, kind: LaneType, sign: str, one: Any, other: Any) -> Any:
    """False where either is NaN, but for !=."""
    if kind not in _REAL:
        return builder.icmp_signed(sign, one, other)
    compare = builder.fcmp_unordered if sign == "!=" else builder.fcmp_ordered
    return compare(sign, one, other)


def _comparison(sign: str) -> Callable[[Any, LaneType, Any], Any]:
    return lambda builder, kind, values: _compare(builder, kind, sign, *values)


def _choice(sign: str) -> Callable[[Any, LaneType, Any], Any]:
    """The first where it compares so, else the second: also where the first is NaN."""
    return lambda builder, kind, values: builder.select(
        _compare(builder, kind, sign, *values), *values
    )


def _library(name: str) -> Callable[[Any, LaneType, Any], Any]:
    def emit(builder: Any, kind: LaneType, values: Any) -> Any:
        return _call(builder, f"llvm.{name}.{kind.suffix}", kind.vector, values)

    return emit


def _call(builder: Any, name: str, result: Any, values: Any) -> Any:
    function_type = ir.FunctionType(result, [value.type for value in values])
    function = cgutils.get_or_insert_function(builder.module, function_type, name)
    return builder.call(function, values)


_NUMBERS = (WIDE, SINGLE, WHOLE)
for _name, _real in (("add", "fadd"), ("sub", "fsub"), ("mul", "fmul")):
    for _function in (getattr(operator, _name), getattr(operator, f"i{_name}")):
        _define(_function, _NUMBERS, _by_kind(_real, _name))
_define(operator.truediv, _REAL, _by_kind("fdiv", ""))
_define(operator.neg, _REAL, _by_kind("fneg", ""))
_define(operator.and_, (WHOLE, MASK), _by_kind("", "and_"))
_define(operator.or_, (WHOLE, MASK), _by_kind("", "or_"))
_define(operator.invert, (WHOLE, MASK), _by_kind("", "not_"))
_define(operator.lshift, (WHOLE,), _by_kind("", "shl"))
_define(operator.rshift, (WHOLE,), _by_kind("", "ashr"))
for _function, _sign in (
    (operator.lt, "<"),
    (operator.le, "<="),
    (operator.gt, ">"),
    (operator.ge, ">="),
    (operator.eq, "=="),
    (operator.ne, "!="),
):
    _define(_function, _NUMBERS, _comparison(_sign), MASK)
_define(max, _NUMBERS, _choice(">"))
_define(min, _NUMBERS, _choice("<"))
_define(abs, _REAL, _library("fabs"))
for _function in (math.sqrt, np.sqrt):
    _define(_function, _REAL, _library("sqrt"))
_define(math.floor, _REAL, _library("floor"))


@intrinsic
def _chosen(typing_context: Any, condition: Any, one: Any, other: Any) -> Any:
    if condition is MASK:
        of_lanes = [kind for kind in (one, other) if isinstance(kind, LaneType)]
        whole_numbers = isinstance(one, types.Integer) and isinstance(other, types.Integer)
        result: Any = of_lanes[0] if of_lanes else WHOLE if whole_numbers else SINGLE
    else:
        result = typing_context.unify_types(one, other)

    def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
        return builder.select(*values)

    return result(MASK if condition is MASK else types.boolean, result, result), generate


def where(condition: Any, one: Any, other: Any) -> Any:
    """``one`` where the condition holds, else ``other``; for numbers as well as for lanes."""
    return one if condition else other


_select: Any = _chosen


@overload(where, strict=False)
def _where_in_kernels(condition: Any, one: Any, other: Any) -> Any:
    return lambda condition, one, other: _select(condition, one, other)


@intrinsic
def _lane_numbers(typing_context: Any) -> Any:
    def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
        return ir.Constant(WHOLE.vector, list(range(LANES)))

    return WHOLE(), generate


def _shift(by: int) -> Any:
    def shift(typing_context: Any, value: Any) -> Any:
        numbers = [min(max(lane + by, 0), LANES - 1) for lane in range(LANES)]

        def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
            order = ir.Constant(ir.VectorType(_INT, LANES), numbers)
            return builder.shuffle_vector(values[0], values[0], order)

        return value(value), generate

    return intrinsic(shift)


@intrinsic
def _any_lane(typing_context: Any, mask: Any) -> Any:
    def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
        bits = ir.IntType(LANES)
        return builder.icmp_unsigned("!=", builder.bitcast(values[0], bits), ir.Constant(bits, 0))

    return types.boolean(MASK), generate


def _place(context: Any, builder: Any, array_type: Any, array: Any, at: Any) -> Any:
    return builder.gep(context.make_array(array_type)(context, builder, array).data, [at])


@intrinsic
def _load(typing_context: Any, array: Any, at: Any) -> Any:
    kind = _OF_ELEMENT[array.dtype]

    def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
        place = _place(context, builder, array, *values)
        loaded = builder.load(builder.bitcast(place, kind.vector.as_pointer()))
        loaded.align = array.dtype.bitwidth // 8
        return loaded

    return kind(array, types.intp), generate


@intrinsic
def _store(typing_context: Any, array: Any, at: Any, value: Any) -> Any:
    kind = _OF_ELEMENT[array.dtype]

    def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
        place = _place(context, builder, array, values[0], values[1])
        stored = builder.store(values[2], builder.bitcast(place, kind.vector.as_pointer()))
        stored.align = array.dtype.bitwidth // 8
        return context.get_dummy_value()

    return types.none(array, types.intp, kind), generate


@intrinsic
def _gather(typing_context: Any, array: Any, start: Any, index: Any) -> Any:
    kind = _OF_ELEMENT[array.dtype]

    def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
        base = _place(context, builder, array, values[0], values[1])
        # A vector of addresses, which the library writes but does not build by itself.
        places = ir.instructions.GEPInstr(builder.block, base, [ir.Constant(_INT, 0)], False, "")
        places.indices = [values[2]]
        places.operands = [base, values[2]]
        places.type = ir.VectorType(base.type, LANES)
        builder._insert(places)
        everywhere = ir.Constant(MASK.vector, [1] * LANES)
        nothing = ir.Constant(kind.vector, ir.Undefined)
        align = ir.Constant(_INT, array.dtype.bitwidth // 8)
        name = f"llvm.masked.gather.{kind.suffix or f'v{LANES}i32'}.v{LANES}p0"
        return _call(builder, name, kind.vector, [places, align, everywhere, nothing])

    return kind(array, types.intp, WHOLE), generate


@intrinsic
def _borrowed(typing_context: Any, array: Any) -> Any:
    def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
        view = context.make_array(array)(context, builder, values[0])
        view.meminfo = cgutils.get_null_value(view.meminfo.type)
        view.parent = cgutils.get_null_value(view.parent.type)
        return view._getvalue()

    return array(array), generate


@intrinsic
def _prefetch(typing_context: Any, array: Any, at: Any) -> Any:
    def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
        place = _place(context, builder, array, *values)
        to_read, into_all_caches, data = (ir.Constant(_INT, n) for n in (0, 3, 1))
        void = ir.VoidType()
        _call(builder, "llvm.prefetch.p0", void, [place, to_read, into_all_caches, data])
        return context.get_dummy_value()

    return types.none(array, types.intp), generate


def _conversion(wanted: LaneType, given: LaneType) -> str:
    if wanted is WHOLE:
        return "fptosi"
    if given is WHOLE:
        return "sitofp"
    return "fptrunc" if wanted is SINGLE else "fpext"


def _converter(wanted: LaneType) -> Any:
    def convert(typing_context: Any, value: Any) -> Any:
        def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
            if value is wanted:
                return values[0]
            return getattr(builder, _conversion(wanted, value))(values[0], wanted.vector)

        return wanted(value), generate

    return intrinsic(convert)


@intrinsic
def _bits(typing_context: Any, value: Any) -> Any:
    def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
        return builder.bitcast(values[0], WHOLE.vector)

    return WHOLE(SINGLE), generate


@intrinsic
def _of_bits(typing_context: Any, value: Any) -> Any:
    def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
        return builder.bitcast(values[0], SINGLE.vector)

    return SINGLE(WHOLE), generate


# Called without the typing context, which numba supplies.
lane_numbers: Any = _lane_numbers  # () -> 0, 1, 2 ... as whole lanes
next_lane: Any = _shift(1)  # each lane gets what the next one holds, the last keeps its own
previous_lane: Any = _shift(-1)
any_lane: Any = _any_lane  # (mask) -> whether it holds anywhere
load: Any = _load  # (flat array, first element) -> lanes
store: Any = _store  # (flat array, first element, lanes)
gather: Any = _gather  # (flat array, start, whole lanes) -> elements at start + each lane's number
# (array): the same array, of which references are not counted. Counting takes more time than most
# of what is called with arrays for each line, and threads that count the same array wait for each
# other. Whoever borrows must hold the array itself for as long.
borrowed: Any = _borrowed
# (flat array, element): have it fetched from memory by the time it is needed.
prefetch: Any = _prefetch
whole: Any = _converter(WHOLE)  # towards 0; meaningless outside the range of int32
single: Any = _converter(SINGLE)
wide: Any = _converter(WIDE)
bits: Any = _bits  # of single lanes, as whole lanes
of_bits: Any = _of_bits  # the single lanes that have these bits
