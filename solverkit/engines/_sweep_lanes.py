"""Eight candidates at a time: AVX-512 instructions as numba intrinsics.

A value is one signed 64-bit limb, or two: ``high``·2^32 + ``low`` with 0 ≤ low < 2^32 and ``high`` signed. A batch is
a set of parallel arrays; a step reads lanes i … i + 7, advances them, and stores the survivors side by side from
place k ≤ i on, so that a batch shrinks in place without a branch.

A macro-step of s steps is T^s(v) = (v >> s)·Q[v mod 2^s] + t[v mod 2^s]. Both tables are held in vector registers:
64 entries of 16 bits (s = 6, small q^6 and |d|) or 16 entries of 64 bits (s = 4, any map); a permutation of the table
by the low bits of v is the look-up.

Everything here takes addresses, as uint64, of arrays whose length is a multiple of eight, plus eight.
"""
# mypy: disable-error-code="no-untyped-def,misc,no-any-return,untyped-decorator,no-untyped-call"
# ruff: noqa: ANN001, ANN202, ARG001 - numba calls these with its own objects

from __future__ import annotations

from llvmlite import ir
from numba import types
from numba.extending import intrinsic

__all__ = [
    "LANES",
    "broad_leaf",
    "broad_step",
    "class_value",
    "ledger_leaf",
    "ledger_step",
    "narrow_leaf",
    "narrow_over",
    "narrow_spill",
    "narrow_step",
    "upper_over",
]

LANES = 8
_LOW = 0xFFFFFFFF
_I1, _I8, _I16, _I32, _I64, _I128 = (ir.IntType(width) for width in (1, 8, 16, 32, 64, 128))
_V64 = ir.VectorType(_I64, LANES)
_V32 = ir.VectorType(_I32, LANES)
_V16 = ir.VectorType(_I16, 4 * LANES)
_MASK = ir.VectorType(_I1, LANES)


class _Lanes:
    """Builder of the vector code of one intrinsic."""

    def __init__(self, builder) -> None:
        self.b = builder

    def same(self, value):
        """Return a vector of eight times ``value``: a Python integer or a 64-bit scalar."""
        if isinstance(value, int):
            return ir.Constant(_V64, [ir.Constant(_I64, value)] * LANES)
        undefined = ir.Constant(_V64, ir.Undefined)
        one = self.b.insert_element(undefined, value, ir.Constant(_I32, 0))
        return self.b.shuffle_vector(one, undefined, ir.Constant(_V32, [ir.Constant(_I32, 0)] * LANES))

    def _pointer(self, base, index, size: int, kind):
        address = self.b.add(base, self.b.mul(index, ir.Constant(_I64, size)))
        return self.b.inttoptr(address, ir.PointerType(kind))

    def load(self, base, index):
        """Load eight 64-bit elements from place ``index`` on."""
        loaded = self.b.load(self._pointer(base, index, 8, _V64), typ=_V64)
        loaded.align = 8
        return loaded

    def load32(self, base, index):
        """Load eight unsigned 32-bit elements from place ``index`` on, widened to 64 bits."""
        loaded = self.b.load(self._pointer(base, index, 4, _V32), typ=_V32)
        loaded.align = 4
        return self.b.zext(loaded, _V64)

    def constant(self, base, byte: int, kind):
        """Load a vector of a table that never changes while the kernel runs."""
        address = self.b.add(base, ir.Constant(_I64, byte))
        loaded = self.b.load(self.b.inttoptr(address, ir.PointerType(kind)), typ=kind)
        loaded.align = 8
        loaded.set_metadata("invariant.load", self.b.module.add_metadata([]))
        return loaded

    def store_kept(self, value, mask, base, index) -> None:
        """Store the lanes of ``value`` that ``mask`` keeps, side by side from place ``index`` on."""
        function = self._declared("llvm.experimental.vector.compress.v8i64", _V64, [_V64, _MASK, _V64])
        kept = self.b.call(function, [value, mask, ir.Constant(_V64, ir.Undefined)])
        self.b.store(kept, self._pointer(base, index, 8, _V64)).align = 8

    def _declared(self, name: str, result, arguments):
        there = self.b.module.globals.get(name)
        return there or ir.Function(self.b.module, ir.FunctionType(result, arguments), name)

    def bits(self, mask):
        """Return the mask as an integer of eight bits, widened."""
        return self.b.zext(self.b.bitcast(mask, _I8), _I64)

    def number(self, mask):
        """Return how many lanes the mask keeps."""
        function = self._declared("llvm.ctpop.i8", _I8, [_I8])
        return self.b.zext(self.b.call(function, [self.b.bitcast(mask, _I8)]), _I64)

    def least(self, one, two):
        """Return the signed minimum, lane by lane."""
        return self.b.call(self._declared("llvm.smin.v8i64", _V64, [_V64, _V64]), [one, two])

    def _small_entry(self, low_half, high_half, index):
        """Return entry ``index`` mod 64 of a table of 64 unsigned 16-bit entries."""
        name = "llvm.x86.avx512.vpermi2var.hi.512"
        function = self._declared(name, _V16, [_V16, _V16, _V16])
        picked = self.b.call(function, [low_half, self.b.bitcast(index, _V16), high_half])
        return self.b.and_(self.b.bitcast(picked, _V64), self.same(0xFFFF))

    def _large_entry(self, low_half, high_half, index):
        """Return entry ``index`` mod 16 of a table of 16 entries of 64 bits."""
        function = self._declared("llvm.x86.avx512.vpermi2var.q.512", _V64, [_V64, _V64, _V64])
        return self.b.call(function, [low_half, index, high_half])

    def small_table(self, base, byte: int):
        """Return a look-up in the table of 64 entries at ``base`` + ``byte``."""
        halves = self.constant(base, byte, _V16), self.constant(base, byte + 64, _V16)
        return lambda index: self._small_entry(*halves, index)

    def large_table(self, base, byte: int):
        """Return a look-up in the table of 16 entries at ``base`` + ``byte``."""
        halves = self.constant(base, byte, _V64), self.constant(base, byte + 64, _V64)
        return lambda index: self._large_entry(*halves, index)

    def jump(self, low, high, shift, factor, addend):
        """Return the limbs of (value >> shift)·factor + addend; shift below 32, factor below 2^32."""
        b, full = self.b, self.same(_LOW)
        shift = self.same(shift)
        carried = b.and_(b.shl(high, b.sub(self.same(32), shift)), full)
        product = b.add(b.mul(b.or_(b.lshr(low, shift), carried), factor), addend)
        upper = b.add(b.mul(b.ashr(high, shift), factor), b.ashr(product, self.same(32)))
        return b.and_(product, full), upper

    def at_least(self, low, high, floor_low, floor_high):
        """Return the mask of two-limb values that are at least the floor."""
        b = self.b
        above = b.icmp_signed(">", high, self.same(floor_high))
        level = b.and_(
            b.icmp_signed("==", high, self.same(floor_high)), b.icmp_unsigned(">=", low, self.same(floor_low))
        )
        return b.or_(above, level)

    def continuation(self, entries, index, geometry):
        """Return (place of the candidate, its mask, h − h0) of eight entries of a continuation table.

        The entry s belongs to the candidate whose T^m1 is s mod 2^m2; with T^m1 = u0 + q^a·x that is
        x = (s − u0)·q^(−a) mod 2^m2. The mask keeps x when bit (x mod modulus) of ``allowed`` is set.
        """
        inverse, offset, window, allowed, reciprocal, modulus = geometry
        b = self.b
        s = self.load32(entries, index)
        x = b.and_(b.add(b.mul(s, self.same(inverse)), self.same(offset)), self.same(window))
        quotient = b.lshr(b.mul(x, self.same(reciprocal)), self.same(24))
        rest = b.sub(x, b.mul(quotient, self.same(modulus)))
        bit = b.and_(b.lshr(self.same(allowed), rest), self.same(1))
        return x, b.icmp_unsigned("!=", bit, self.same(0))


def _signature(count: int, geometry: bool = False):
    word = types.uint64
    return word(*[word] * count, *([types.UniTuple(word, 6)] if geometry else []))


@intrinsic
def class_value(typing, slope, residue, offset, beta, depth, height):
    """Return the limbs of (slope·residue + offset·beta) / 2^depth + slope·height.

    The value must lie within ±2^95; ``offset`` is a signed number in an uint64.
    """

    def code(context, builder, signature, arguments):
        b = builder
        wide = [b.sext(part, _I128) if place == 2 else b.zext(part, _I128) for place, part in enumerate(arguments)]
        slope, residue, offset, beta, depth, height = wide
        image = b.add(b.mul(slope, residue), b.mul(offset, beta))
        value = b.add(b.ashr(image, depth), b.mul(slope, height))
        low = b.and_(b.trunc(value, _I64), ir.Constant(_I64, _LOW))
        high = b.trunc(b.ashr(value, ir.Constant(_I128, 32)), _I64)
        return context.make_tuple(b, signature.return_type, [low, high])

    word = types.uint64
    return types.UniTuple(word, 2)(*[word] * 6), code


@intrinsic
def narrow_step(typing, ids, values, i, k, table, bias, floor):
    """Advance eight one-limb values by twelve steps; keep those that are at least ``floor`` after six and twelve.

    Each value must be below the limit that `narrow_over` tests; ``table`` holds 64 Q and 64 t + bias of 16 bits.

    Returns:
        how many are kept, at most 8.
    """

    def code(context, builder, signature, arguments):
        lanes = _Lanes(builder)
        ids, values, i, k, table, bias, floor = arguments
        label, value = lanes.load(ids, i), lanes.load(values, i)
        slope, shift = lanes.small_table(table, 0), lanes.small_table(table, 128)
        lowest = None
        for _ in range(2):
            product = builder.mul(builder.ashr(value, lanes.same(6)), slope(value))
            value = builder.add(product, builder.sub(shift(value), lanes.same(bias)))
            lowest = value if lowest is None else lanes.least(lowest, value)
        mask = builder.icmp_signed(">=", lowest, lanes.same(floor))
        lanes.store_kept(label, mask, ids, k)
        lanes.store_kept(value, mask, values, k)
        return lanes.number(mask)

    return _signature(7), code


@intrinsic
def narrow_over(typing, values, i, limit):
    """Return the bits of the lanes whose one-limb value is at least ``limit``."""

    def code(context, builder, signature, arguments):
        lanes = _Lanes(builder)
        values, i, limit = arguments
        return lanes.bits(builder.icmp_signed(">=", lanes.load(values, i), lanes.same(limit)))

    return _signature(3), code


@intrinsic
def narrow_spill(typing, ids, values, i, limit, tall_ids, tall_low, tall_high, k):
    """Append the lanes that reach ``limit`` to a two-limb batch at place k, −1 here; return their number."""

    def code(context, builder, signature, arguments):
        lanes = _Lanes(builder)
        ids, values, i, limit, tall_ids, tall_low, tall_high, k = arguments
        label, value = lanes.load(ids, i), lanes.load(values, i)
        mask = builder.icmp_signed(">=", value, lanes.same(limit))
        lanes.store_kept(label, mask, tall_ids, k)
        lanes.store_kept(builder.and_(value, lanes.same(_LOW)), mask, tall_low, k)
        lanes.store_kept(builder.ashr(value, lanes.same(32)), mask, tall_high, k)
        place = builder.add(values, builder.mul(i, ir.Constant(_I64, 8)))
        rest = builder.select(mask, lanes.same(-1), value)
        builder.store(rest, builder.inttoptr(place, ir.PointerType(_V64))).align = 8
        return lanes.number(mask)

    return _signature(8), code


@intrinsic
def upper_over(typing, highs, i, limit):
    """Return the bits of the lanes whose upper limb is at least ``limit``."""

    def code(context, builder, signature, arguments):
        lanes = _Lanes(builder)
        highs, i, limit = arguments
        return lanes.bits(builder.icmp_signed(">=", lanes.load(highs, i), lanes.same(limit)))

    return _signature(3), code


@intrinsic
def broad_step(typing, ids, lows, highs, i, k, table, bias, floor_high):
    """Advance eight two-limb values by twelve steps; keep those whose upper limb is at least ``floor_high`` twice.

    ``floor_high`` is the upper limb of the floor, so that a value just below the floor may be kept: never the reverse.
    """

    def code(context, builder, signature, arguments):
        lanes = _Lanes(builder)
        ids, lows, highs, i, k, table, bias, floor_high = arguments
        label, low, high = (lanes.load(part, i) for part in (ids, lows, highs))
        slope, shift = lanes.small_table(table, 0), lanes.small_table(table, 128)
        lowest = None
        for _ in range(2):
            addend = builder.sub(shift(low), lanes.same(bias))
            low, high = lanes.jump(low, high, 6, slope(low), addend)
            lowest = high if lowest is None else lanes.least(lowest, high)
        mask = builder.icmp_signed(">=", lowest, lanes.same(floor_high))
        for value, array in ((label, ids), (low, lows), (high, highs)):
            lanes.store_kept(value, mask, array, k)
        return lanes.number(mask)

    return _signature(8), code


@intrinsic
def ledger_step(typing, ids, lows, highs, ledgers, i, k, table, floor_low, floor_high, budget, cap, ceiling):
    """Advance eight two-limb values and their ledgers by eight steps.

    Keeps those that are at least the floor after four and after eight steps, and then within the budget and with an
    upper limb of at most ``ceiling``. ``table`` holds
    16 each of Q, t, charge without relief, relief, growth, as 64-bit entries; a ledger is spent·2^32 + ratio, the
    ratio a multiple of 2^(−28) that is never too small (see `_sweep_ledger`).
    """

    def code(context, builder, signature, arguments):
        b, lanes = builder, _Lanes(builder)
        ids, lows, highs, ledgers, i, k, table, floor_low, floor_high, budget, cap, ceiling = arguments
        label, low, high, ledger = (lanes.load(part, i) for part in (ids, lows, highs, ledgers))
        slope, shift, charge, relief, growth = (lanes.large_table(table, 128 * part) for part in range(5))
        spent, ratio = b.lshr(ledger, lanes.same(32)), b.and_(ledger, lanes.same(_LOW))
        mask = ir.Constant(_MASK, [ir.Constant(_I1, 1)] * LANES)
        umin = lanes._declared("llvm.umin.v8i64", _V64, [_V64, _V64])  # noqa: SLF001 - our own builder
        smax = lanes._declared("llvm.smax.v8i64", _V64, [_V64, _V64])  # noqa: SLF001
        for _ in range(2):
            relieved = b.add(b.lshr(b.mul(ratio, relief(low)), lanes.same(28)), lanes.same(1))
            spent = b.add(spent, b.call(smax, [b.sub(charge(low), relieved), lanes.same(0)]))
            ratio = b.add(b.lshr(b.mul(ratio, growth(low)), lanes.same(24)), lanes.same(1))
            ratio = b.call(umin, [ratio, lanes.same(cap)])
            low, high = lanes.jump(low, high, 4, slope(low), shift(low))
            mask = b.and_(mask, lanes.at_least(low, high, floor_low, floor_high))
        mask = b.and_(mask, b.icmp_unsigned("<=", spent, lanes.same(budget)))
        mask = b.and_(mask, b.icmp_signed("<=", high, lanes.same(ceiling)))
        ledger = b.or_(b.shl(spent, lanes.same(32)), ratio)
        for value, array in ((label, ids), (low, lows), (high, highs), (ledger, ledgers)):
            lanes.store_kept(value, mask, array, k)
        return lanes.number(mask)

    return _signature(12), code


@intrinsic
def narrow_leaf(typing, entries, slopes, shifts, e, ids, values, k, label, stride, qa, u0, depth, floor, geometry):
    """Append the candidates of eight continuations to a one-limb batch at place k; return how many were kept.

    ``geometry`` is (inverse, offset, window, allowed, reciprocal, modulus) as in `_Lanes.continuation`; the label of
    a candidate is ``label`` + (x << ``stride``), its value after both parts ((u0 + qa·x) >> depth)·Q + t.
    """

    def code(context, builder, signature, arguments):
        b, lanes = builder, _Lanes(builder)
        entries, slopes, shifts, e, ids, values, k, label, stride, qa, u0, depth, floor = arguments[:13]
        geometry = [b.extract_value(arguments[13], part) for part in range(6)]
        x, mask = lanes.continuation(entries, e, geometry)
        middle = b.add(lanes.same(u0), b.mul(lanes.same(qa), x))
        value = b.add(b.mul(b.ashr(middle, lanes.same(depth)), lanes.load32(slopes, e)), lanes.load(shifts, e))
        mask = b.and_(mask, b.icmp_signed(">=", value, lanes.same(floor)))
        lanes.store_kept(b.add(lanes.same(label), b.shl(x, lanes.same(stride))), mask, ids, k)
        lanes.store_kept(value, mask, values, k)
        return lanes.number(mask)

    return _signature(13, geometry=True), code


@intrinsic
def broad_leaf(
    typing,
    entries,
    slopes,
    shifts,
    e,
    ids,
    lows,
    highs,
    k,
    label,
    stride,
    qa,
    u_low,
    u_high,
    depth,
    floor_high,
    geometry,
):
    """Append the candidates of eight continuations to a two-limb batch at place k; return how many were kept."""

    def code(context, builder, signature, arguments):
        b, lanes = builder, _Lanes(builder)
        entries, slopes, shifts, e, ids, lows, highs, k = arguments[:8]
        label, stride, qa, u_low, u_high, depth, floor_high = arguments[8:15]
        geometry = [b.extract_value(arguments[15], part) for part in range(6)]
        x, mask = lanes.continuation(entries, e, geometry)
        sum_ = b.add(lanes.same(u_low), b.mul(lanes.same(qa), x))
        low, high = b.and_(sum_, lanes.same(_LOW)), b.add(lanes.same(u_high), b.lshr(sum_, lanes.same(32)))
        low, high = lanes.jump(low, high, depth, lanes.load32(slopes, e), lanes.load(shifts, e))
        mask = b.and_(mask, b.icmp_signed(">=", high, lanes.same(floor_high)))
        label = b.add(lanes.same(label), b.shl(x, lanes.same(stride)))
        for value, array in ((label, ids), (low, lows), (high, highs)):
            lanes.store_kept(value, mask, array, k)
        return lanes.number(mask)

    return _signature(15, geometry=True), code


@intrinsic
def ledger_leaf(
    typing, entries, slopes, shifts, e, ids, lows, highs, ledgers, k, label, stride, qa, u_low, u_high, depth,
    starts, spent, floor_low, floor_high, geometry,
):  # fmt: skip
    """Append the candidates of eight continuations and their ledgers; return how many were kept."""

    def code(context, builder, signature, arguments):
        b, lanes = builder, _Lanes(builder)
        entries, slopes, shifts, e, ids, lows, highs, ledgers, k = arguments[:9]
        label, stride, qa, u_low, u_high, depth, starts, spent, floor_low, floor_high = arguments[9:19]
        geometry = [b.extract_value(arguments[19], part) for part in range(6)]
        x, mask = lanes.continuation(entries, e, geometry)
        sum_ = b.add(lanes.same(u_low), b.mul(lanes.same(qa), x))
        low, high = b.and_(sum_, lanes.same(_LOW)), b.add(lanes.same(u_high), b.lshr(sum_, lanes.same(32)))
        low, high = lanes.jump(low, high, depth, lanes.load32(slopes, e), lanes.load(shifts, e))
        mask = b.and_(mask, lanes.at_least(low, high, floor_low, floor_high))
        label = b.add(lanes.same(label), b.shl(x, lanes.same(stride)))
        ledger = b.add(lanes.load(starts, e), lanes.same(spent))
        for value, array in ((label, ids), (low, lows), (high, highs), (ledger, ledgers)):
            lanes.store_kept(value, mask, array, k)
        return lanes.number(mask)

    return _signature(19, geometry=True), code
