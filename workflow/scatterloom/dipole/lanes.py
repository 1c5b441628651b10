"""Complex vectors in the lanes of the processor, for loops that a compiler does not vectorize.

Data lie in groups: the real parts of a few waves at one point, then their imaginary parts.
The functions here act on groups at addresses given as integers and compile to vector
instructions of whatever width the processor has. The number of lanes is the length of the
tuple `lanes`, and the precision that of the array `like`, so that both belong to a compiled
function's signature. `re` and `im` are the offsets of the parts in a group; exchanging them
makes the inverse of a transform, since exchanging the parts is i times the conjugate.
"""

from __future__ import annotations

from math import cos, pi, sin, sqrt
from typing import Any

from llvmlite import ir
from numba import types
from numba.extending import intrinsic

_FAST = ("contract", "reassoc", "nsz", "arcp")
_I32, _I64 = ir.IntType(32), ir.IntType(64)


class _Vector:
    """Real and imaginary parts of a group, as values of the code being built."""

    def __init__(self, builder: Any, re: Any, im: Any) -> None:
        self.b, self.re, self.im = builder, re, im

    def __add__(self, other: _Vector) -> _Vector:
        b = self.b
        return _Vector(
            b, b.fadd(self.re, other.re, flags=_FAST), b.fadd(self.im, other.im, flags=_FAST)
        )

    def __sub__(self, other: _Vector) -> _Vector:
        b = self.b
        return _Vector(
            b, b.fsub(self.re, other.re, flags=_FAST), b.fsub(self.im, other.im, flags=_FAST)
        )

    def times(self, re: Any, im: Any) -> _Vector:
        """Times a complex value of vectors."""
        b = self.b

        def mul(x: Any, y: Any) -> Any:
            return b.fmul(x, y, flags=_FAST)

        return _Vector(
            b,
            b.fsub(mul(self.re, re), mul(self.im, im), flags=_FAST),
            b.fadd(mul(self.re, im), mul(self.im, re), flags=_FAST),
        )

    def scaled(self, factor: float) -> _Vector:
        """Times a real constant."""
        b, c = self.b, ir.Constant(self.re.type, [factor] * self.re.type.count)
        return _Vector(b, b.fmul(self.re, c, flags=_FAST), b.fmul(self.im, c, flags=_FAST))

    def over_i(self) -> _Vector:
        """Times -i."""
        return _Vector(self.b, self.im, self.b.fneg(self.re, flags=_FAST))

    def turned(self, angle: float) -> _Vector:
        """Times exp(-i angle)."""
        c, s = self.scaled(cos(angle)), self.over_i().scaled(sin(angle))
        return c + s


class _Memory:
    """Loads and stores of groups."""

    def __init__(self, builder: Any, lanes: Any, like: Any) -> None:
        self.b = builder
        self.real = ir.FloatType() if like.dtype == types.float32 else ir.DoubleType()
        self.size = 4 if like.dtype == types.float32 else 8
        self.vector = ir.VectorType(self.real, lanes.count)

    def at(self, address: Any, kind: Any) -> Any:
        return self.b.inttoptr(address, kind.as_pointer())

    def load(self, address: Any, re: Any, im: Any) -> _Vector:
        return _Vector(
            self.b,
            self.b.load(self.at(self.b.add(address, re), self.vector), align=self.size),
            self.b.load(self.at(self.b.add(address, im), self.vector), align=self.size),
        )

    def store(self, value: _Vector, address: Any, re: Any, im: Any) -> None:
        self.b.store(value.re, self.at(self.b.add(address, re), self.vector), align=self.size)
        self.b.store(value.im, self.at(self.b.add(address, im), self.vector), align=self.size)

    def spread(self, scalar: Any) -> Any:
        one = self.b.insert_element(ir.Constant(self.vector, ir.Undefined), scalar, _I32(0))
        mask = ir.Constant(ir.VectorType(_I32, self.vector.count), [0] * self.vector.count)
        return self.b.shuffle_vector(one, one, mask)

    def factor(self, table: Any, position: int) -> tuple[Any, Any]:
        """A complex number of a table, in all lanes."""
        parts = []
        for part in (0, 1):
            address = self.b.add(table, _I64(self.size * (2 * position + part)))
            parts.append(self.spread(self.b.load(self.at(address, self.real))))
        return parts[0], parts[1]

    def shuffled(self, vector: Any, choice: list[int]) -> Any:
        return self.b.shuffle_vector(
            vector, vector, ir.Constant(ir.VectorType(_I32, len(choice)), choice)
        )


def _dft(values: list[_Vector]) -> list[_Vector]:
    """Discrete Fourier transform of 1, 2, 3, 4, 5 or 8 values."""
    n = len(values)
    if n == 1:
        return values
    if n == 2:
        a, b = values
        return [a + b, a - b]
    if n in (4, 8):
        first, second = _dft(values[::2]), _dft(values[1::2])
        if n == 4:
            second[1] = second[1].over_i()
        else:
            half = sqrt(0.5)
            _, one, two, three = second
            second[1] = (one + one.over_i()).scaled(half)
            second[2] = two.over_i()
            second[3] = (three.over_i() - three).scaled(half)
        pairs = list(zip(first, second, strict=True))
        return [a + b for a, b in pairs] + [a - b for a, b in pairs]
    # Odd lengths: sums and differences of mirrored pairs.
    half = n // 2
    plus = [values[j] + values[n - j] for j in range(1, half + 1)]
    minus = [(values[j] - values[n - j]).over_i() for j in range(1, half + 1)]
    total = values[0]
    for p in plus:
        total = total + p
    out = [total] * n
    for k in range(1, half + 1):
        angles = [2.0 * pi * (j * k % n) / n for j in range(1, half + 1)]
        even, odd = values[0], minus[0].scaled(sin(angles[0]))
        for p, angle in zip(plus, angles, strict=True):
            even = even + p.scaled(cos(angle))
        for m, angle in zip(minus[1:], angles[1:], strict=True):
            odd = odd + m.scaled(sin(angle))
        out[k], out[n - k] = even + odd, even - odd
    return out


def _butterfly(radix: int, twiddled: bool) -> Any:
    def make(typingctx, source, source_step, target, target_step, table, re, im, lanes, like):  # type: ignore[no-untyped-def]
        signature = types.void(source, source_step, target, target_step, table, re, im, lanes, like)

        def build(context, builder, sig, args):  # type: ignore[no-untyped-def]
            source, source_step, target, target_step, table, re, im = args[:7]
            memory = _Memory(builder, sig.args[7], sig.args[8])
            values = []
            for _ in range(radix):
                values.append(memory.load(source, re, im))
                source = builder.add(source, source_step)
            for k, value in enumerate(_dft(values)):
                if k and twiddled:
                    value = value.times(*memory.factor(table, k - 1))
                memory.store(value, target, re, im)
                target = builder.add(target, target_step)
            return context.get_dummy_value()

        return signature, build

    return intrinsic(make)


butterfly2 = _butterfly(2, True)
butterfly3 = _butterfly(3, True)
butterfly4 = _butterfly(4, True)
butterfly5 = _butterfly(5, True)
butterfly8 = _butterfly(8, True)
last1 = _butterfly(1, False)
last2 = _butterfly(2, False)
last3 = _butterfly(3, False)
last4 = _butterfly(4, False)
last5 = _butterfly(5, False)
last8 = _butterfly(8, False)


@intrinsic
def expand(typingctx, source, even, odd, table, re, im, lanes, like):  # type: ignore[no-untyped-def]
    """Copy a group to `even`, and times the first factor of `table` to `odd`."""
    signature = types.void(source, even, odd, table, re, im, lanes, like)

    def build(context, builder, sig, args):  # type: ignore[no-untyped-def]
        source, even, odd, table, re, im = args[:6]
        memory = _Memory(builder, sig.args[6], sig.args[7])
        value = memory.load(source, re, im)
        memory.store(value, even, re, im)
        memory.store(value.times(*memory.factor(table, 0)), odd, re, im)
        return context.get_dummy_value()

    return signature, build


@intrinsic
def combine(typingctx, even, odd, target, table, re, im, lanes, like):  # type: ignore[no-untyped-def]
    """Store `even` plus `odd` times the first factor of `table`."""
    signature = types.void(even, odd, target, table, re, im, lanes, like)

    def build(context, builder, sig, args):  # type: ignore[no-untyped-def]
        even, odd, target, table, re, im = args[:6]
        memory = _Memory(builder, sig.args[6], sig.args[7])
        value = memory.load(odd, re, im).times(*memory.factor(table, 0))
        memory.store(memory.load(even, re, im) + value, target, re, im)
        return context.get_dummy_value()

    return signature, build


@intrinsic
def clear(typingctx, target, lanes, like):  # type: ignore[no-untyped-def]
    """Store zeros in a group."""
    signature = types.void(target, lanes, like)

    def build(context, builder, sig, args):  # type: ignore[no-untyped-def]
        memory = _Memory(builder, sig.args[1], sig.args[2])
        zero = ir.Constant(memory.vector, [0.0] * memory.vector.count)
        size = _I64(memory.size * memory.vector.count)
        memory.store(_Vector(builder, zero, zero), args[0], _I64(0), size)
        return context.get_dummy_value()

    return signature, build


@intrinsic
def mix(typingctx, one, other, lanes, like):  # type: ignore[no-untyped-def]
    """Replace two groups by their sum and their difference."""
    signature = types.void(one, other, lanes, like)

    def build(context, builder, sig, args):  # type: ignore[no-untyped-def]
        memory = _Memory(builder, sig.args[2], sig.args[3])
        re, im = _I64(0), _I64(memory.size * memory.vector.count)
        a, b = memory.load(args[0], re, im), memory.load(args[1], re, im)
        memory.store(a + b, args[0], re, im)
        memory.store(a - b, args[1], re, im)
        return context.get_dummy_value()

    return signature, build


@intrinsic
def scale(typingctx, source, factors, target, lanes, like):  # type: ignore[no-untyped-def]
    """Store a group times one real factor for every lane."""
    signature = types.void(source, factors, target, lanes, like)

    def build(context, builder, sig, args):  # type: ignore[no-untyped-def]
        memory = _Memory(builder, sig.args[3], sig.args[4])
        re, im = _I64(0), _I64(memory.size * memory.vector.count)
        value = memory.load(args[0], re, im)
        factor = builder.load(memory.at(args[1], memory.vector), align=memory.size)
        product = _Vector(
            builder,
            builder.fmul(value.re, factor, flags=_FAST),
            builder.fmul(value.im, factor, flags=_FAST),
        )
        memory.store(product, args[2], re, im)
        return context.get_dummy_value()

    return signature, build


@intrinsic
def tensor_times(typingctx, target, tensor, signs, re, im, lanes, like):  # type: ignore[no-untyped-def]
    """Multiply the three components of all waves of a group by a symmetric tensor, in place.

    Lanes: x of all waves, y of all waves, z of all waves, the rest unused. Tensor: real parts
    of xx, yy, zz, xy, xz, yz, then the imaginary ones; each is multiplied by its sign.
    """
    signature = types.void(target, tensor, signs, re, im, lanes, like)

    def build(context, builder, sig, args):  # type: ignore[no-untyped-def]
        target, tensor, signs, re, im = args[:5]
        memory = _Memory(builder, sig.args[5], sig.args[6])
        count = memory.vector.count
        waves = count // 3
        # Eight values are loaded for six; the table has room for two more at its end.
        eight = ir.VectorType(memory.real, 8)
        sign = builder.load(memory.at(signs, eight), align=memory.size)
        parts = []
        for part in (0, 1):
            address = builder.add(tensor, _I64(6 * memory.size * part))
            loaded = builder.load(memory.at(address, eight), align=memory.size)
            parts.append(builder.fmul(loaded, sign, flags=_FAST))

        def per_component(entries: tuple[int, int, int]) -> tuple[Any, Any]:
            choice = [e for e in entries for _ in range(waves)] + [6] * (count - 3 * waves)
            return memory.shuffled(parts[0], choice), memory.shuffled(parts[1], choice)

        value = memory.load(target, re, im)
        rest = list(range(3 * waves, count))

        def rolled(by: int) -> _Vector:
            choice = [(lane + by * waves) % (3 * waves) for lane in range(3 * waves)] + rest
            return _Vector(
                builder, memory.shuffled(value.re, choice), memory.shuffled(value.im, choice)
            )

        out = value.times(*per_component((0, 1, 2)))
        out = out + rolled(1).times(*per_component((3, 5, 4)))
        out = out + rolled(2).times(*per_component((4, 3, 5)))
        memory.store(out, target, re, im)
        return context.get_dummy_value()

    return signature, build
