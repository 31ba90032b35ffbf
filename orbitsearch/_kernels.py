"""All compiled code: Taylor steps of three equal masses, eight starts side by side.

With A = r2 - r1, B = r3 - r2, C = r1 - r3 (so A + B + C = 0) the equations of motion read
X'' = S - 3 X q_X with q_X = |X|^(-3) and S = A q_A + B q_B + C q_C, for X in {A, B, C}.  Every pair
keeps its own series although one is redundant: the difference of two long vectors would spoil the
short one in a close approach.  A state is 12 numbers, (A, B, C, A', B', C').

Eight starts advance in the lanes of one vector.  Numba has no vector type of its own, and leaving
the lanes to LLVM's own vectoriser gave 0.55 microseconds a lane-step in a prototype; with explicit
vectors it is 0.2 (`python -m tests.bench`).  So a small type is defined below, and LLVM splits it
into whatever registers the machine has.
In plain Python (``NUMBA_DISABLE_JIT=1``) a lane vector is a row of a numpy array and the same code
runs, slowly, under a debugger or a coverage tool.

Everything lives in this one file on purpose: numba's disk cache looks at the file that holds a
function, and would not notice a change of a compiled function, or a table, imported from elsewhere.

References
----------
À. Jorba, M. Zou, Experimental Mathematics 14 (2005) 99-117: recurrences for products and powers
(section 2), step size from the last two coefficients (section 3.2).
"""

# mypy: disable-error-code="no-untyped-def, no-untyped-call, untyped-decorator, misc"

from __future__ import annotations

import math
import operator
from pathlib import Path

import numpy as np
from llvmlite import ir
from numba import njit, types
from numba.core import cgutils
from numba.extending import intrinsic, models, overload, register_model
from numpy.typing import NDArray

__all__ = [
    "EVENTS",
    "LANES",
    "ORDER",
    "STATUS_BUDGET",
    "STATUS_COLLISION",
    "STATUS_DONE",
    "STATUS_ESCAPE",
    "dense",
    "flow",
    "is_cached",
    "scan",
    "track",
    "track_events",
    "workspace",
]

LANES = 8
ORDER = 20
TERMS = ORDER + 1

STATUS_DONE = 0
STATUS_COLLISION = 1
STATUS_ESCAPE = 2
STATUS_BUDGET = 3

# Rows of the workspace: Ax Ay Bx By Cx Cy, then for each pair |X|^2, |X|^-3, k/2 times the k-th
# coefficient of |X|^2, and last the step length and, after the step, the least squared side.  The
# variational part follows: |X|^-5, u = 3 X |X|^-5, and the symmetric matrix
# G = I |X|^-3 - 3 X X^T |X|^-5; then six rows for each tangent.
S, Q, D, H = 6, 9, 12, 15
P, U, G, TANGENT = 16, 19, 25, 34

# Event functions: 0 twice the signed area, 1..3 difference of the two sides that meet in that body
# (squared), 4 rate of kinetic energy, 5..7 half the rate of the squared sides A, B, C.
EVENTS = 8
SCAN_EVENTS = 5

# h = exp(-2 - 0.7/(N-1)) times the estimated radius of convergence, Jorba & Zou section 3.2.1.
SAFETY = math.exp(-2.0 - 0.7 / (ORDER - 1))

ESCAPE_RATIO2 = 15.0**2
ESCAPE_DISTANCE = 5.0
ESCAPE_MARGIN = 1.1


# ---------------------------------------------------------------- lane vectors


class LaneVector(types.Type):
    """Numba type of one double for each lane."""

    def __init__(self):
        super().__init__(name="LaneVector")


LANE_VECTOR = LaneVector()
_IR = ir.VectorType(ir.DoubleType(), LANES)
_I32 = ir.IntType(32)
_IBITS = ir.VectorType(ir.IntType(64), LANES)


@register_model(LaneVector)
class _LaneVectorModel(models.PrimitiveModel):
    def __init__(self, dmm, fe_type):
        super().__init__(dmm, fe_type, _IR)


def _arithmetic(instruction):
    @intrinsic
    def apply(typingctx, a, b):
        def codegen(context, builder, signature, args):
            return getattr(builder, instruction)(*args, flags=("contract",))

        return LANE_VECTOR(LANE_VECTOR, LANE_VECTOR), codegen

    return apply


@intrinsic
def _broadcast(typingctx, x):
    def codegen(context, builder, signature, args):
        nothing = ir.Constant(_IR, ir.Undefined)
        first = builder.insert_element(nothing, args[0], ir.Constant(_I32, 0))
        mask = ir.Constant(ir.VectorType(_I32, LANES), [0] * LANES)
        return builder.shuffle_vector(first, nothing, mask)

    return LANE_VECTOR(types.float64), codegen


def _unary(name):
    @intrinsic
    def apply(typingctx, x):
        def codegen(context, builder, signature, args):
            kind = ir.FunctionType(_IR, [_IR])
            full = f"llvm.{name}.v{LANES}f64"
            return builder.call(cgutils.get_or_insert_function(builder.module, kind, full), args)

        return LANE_VECTOR(LANE_VECTOR), codegen

    return apply


_vector_sqrt = _unary("sqrt")
_vector_magnitude = _unary("fabs")


@intrinsic
def _vector_choose(typingctx, a, b, x, y):
    def codegen(context, builder, signature, args):
        at_least = builder.fcmp_ordered(">=", args[0], args[1])
        return builder.select(at_least, args[2], args[3])

    return LANE_VECTOR(*(LANE_VECTOR,) * 4), codegen


@intrinsic
def _vector_bits(typingctx, x):
    def codegen(context, builder, signature, args):
        return builder.sitofp(builder.bitcast(args[0], _IBITS), _IR)

    return LANE_VECTOR(LANE_VECTOR), codegen


@intrinsic
def _vector_scale(typingctx, x, power):
    def codegen(context, builder, signature, args):
        shift = ir.Constant(_IBITS, [52] * LANES)
        exponent = builder.shl(builder.fptosi(args[1], _IBITS), shift)
        return builder.bitcast(builder.add(builder.bitcast(args[0], _IBITS), exponent), _IR)

    return LANE_VECTOR(LANE_VECTOR, LANE_VECTOR), codegen


def _address(context, builder, array_type, array, row, term):
    base = context.make_array(array_type)(context, builder, array)
    terms = builder.extract_value(base.shape, 1)
    index = builder.mul(builder.add(builder.mul(row, terms), term), ir.Constant(row.type, LANES))
    return builder.bitcast(builder.gep(base.data, [index]), _IR.as_pointer())


# align=8, not 64: the workspace is aligned for speed, but nothing may crash when it is not.
@intrinsic
def _load(typingctx, array, row, term):
    def codegen(context, builder, signature, args):
        return builder.load(_address(context, builder, signature.args[0], *args), align=8)

    return LANE_VECTOR(array, types.intp, types.intp), codegen


@intrinsic
def _store(typingctx, array, row, term, value):
    def codegen(context, builder, signature, args):
        address = _address(context, builder, signature.args[0], *args[:3])
        builder.store(args[3], address, align=8)
        return context.get_dummy_value()

    return types.void(array, types.intp, types.intp, LANE_VECTOR), codegen


def splat(x):
    """The same number in every lane."""
    return np.full(LANES, x)


def load(array, row, term):
    """Lanes of coefficient `term` of series `row`."""
    return array[row, term].copy()


def store(array, row, term, value):
    """Set the lanes of coefficient `term` of series `row`."""
    array[row, term] = value


def root(x):
    """Square root of a number or of each lane."""
    return np.sqrt(x)


def choose(a, b, x, y):
    """Lane by lane x where a >= b, else y."""
    return np.where(a >= b, x, y)


def magnitude(x):
    """Absolute value of each lane."""
    return np.abs(x)


def bits(x):
    """Bit pattern of each lane as an integer, given as a double."""
    return x.view(np.int64).astype(np.float64)


def scale(x, power):
    """Each lane times two to a whole power, by adding to its exponent."""
    return (x.view(np.int64) + (power.astype(np.int64) << 52)).view(np.float64)


@overload(choose)
def _choose_compiled(a, b, x, y):
    return lambda a, b, x, y: _vector_choose(a, b, x, y)


@overload(magnitude)
def _magnitude_compiled(x):
    return lambda x: _vector_magnitude(x)


@overload(bits)
def _bits_compiled(x):
    return lambda x: _vector_bits(x)


@overload(scale)
def _scale_compiled(x, power):
    return lambda x, power: _vector_scale(x, power)


@overload(splat)
def _splat_compiled(x):
    return lambda x: _broadcast(float(x))


@overload(load)
def _load_compiled(array, row, term):
    return lambda array, row, term: _load(array, row, term)


@overload(store)
def _store_compiled(array, row, term, value):
    return lambda array, row, term, value: _store(array, row, term, value)


@overload(root)
def _root_compiled(x):
    if isinstance(x, LaneVector):
        return lambda x: _vector_sqrt(x)
    return lambda x: math.sqrt(x)


def _define(python_operator, apply):
    @overload(python_operator)
    def compiled(a, b):
        if isinstance(a, LaneVector) and isinstance(b, LaneVector):
            return lambda a, b: apply(a, b)
        if isinstance(a, LaneVector) and isinstance(b, types.Float):
            return lambda a, b: apply(a, _broadcast(b))
        if isinstance(b, LaneVector) and isinstance(a, types.Float):
            return lambda a, b: apply(_broadcast(a), b)
        return None


_define(operator.add, _arithmetic("fadd"))
_define(operator.sub, _arithmetic("fsub"))
_define(operator.mul, _arithmetic("fmul"))
_define(operator.truediv, _arithmetic("fdiv"))

# "contract" lets LLVM fuse a*b + c; nothing else of fastmath, which would break compensated sums.
_jit = njit(cache=True, nogil=True, error_model="numpy", fastmath={"contract"})
_inlined = njit(
    cache=True, nogil=True, error_model="numpy", fastmath={"contract"}, forceinline=True
)


# ---------------------------------------------------------------- Taylor series


@_inlined
def _pair(w, p, n, variational):
    """Order n >= 1 of |X|^2, |X|^-3 and X |X|^-3 for pair p; returns the last, x and y.

    For q = s^α, n s_0 q_n = Σ_{k=1..n} ((α+1) k - n) s_k q_{n-k} (Jorba & Zou, Proposition 2.1);
    here α = -3/2 and d_k = k s_k / 2.  When `variational`, also of |X|^-5 (α = -5/2) and of
    u = 3 X |X|^-5, for which the loop has nearly everything at hand.  Six, or ten, independent
    sums: a fused multiply-add takes four cycles, and two can start in each.
    """
    x, y = 2 * p, 2 * p + 1
    sx = splat(0.0)
    sy = splat(0.0)
    qs = splat(0.0)
    qd = splat(0.0)
    fx = splat(0.0)
    fy = splat(0.0)
    ps = splat(0.0)
    pd = splat(0.0)
    ux = splat(0.0)
    uy = splat(0.0)
    for k in range(1, n):
        xk = load(w, x, k)
        yk = load(w, y, k)
        sk = load(w, S + p, k)
        dk = load(w, D + p, k)
        q = load(w, Q + p, n - k)
        sx = sx + xk * load(w, x, n - k)
        sy = sy + yk * load(w, y, n - k)
        qs = qs + sk * q
        qd = qd + dk * q
        fx = fx + xk * q
        fy = fy + yk * q
        if variational:
            r = load(w, P + p, n - k)
            ps = ps + sk * r
            pd = pd + dk * r
            ux = ux + xk * r
            uy = uy + yk * r
    x0 = load(w, x, 0)
    y0 = load(w, y, 0)
    xn = load(w, x, n)
    yn = load(w, y, n)
    q0 = load(w, Q + p, 0)
    m = float(n)
    over = 1.0 / (m * load(w, S + p, 0))
    sn = sx + sy + 2.0 * (x0 * xn + y0 * yn)
    dn = (0.5 * m) * sn
    qn = splat(0.0) - (m * qs + qd + (m * sn + dn) * q0) * over
    store(w, S + p, n, sn)
    store(w, D + p, n, dn)
    store(w, Q + p, n, qn)
    if variational:
        r0 = load(w, P + p, 0)
        rn = splat(0.0) - (m * ps + 3.0 * pd + (m * sn + 3.0 * dn) * r0) * over
        store(w, P + p, n, rn)
        store(w, U + x, n, 3.0 * (ux + x0 * rn + xn * r0))
        store(w, U + y, n, 3.0 * (uy + y0 * rn + yn * r0))
    return fx + x0 * qn + xn * q0, fy + y0 * qn + yn * q0


@_inlined
def _extend(w, row, n, ax, ay, bx, by, cx, cy):
    """Coefficient n + 2 of the three pairs from order n of X |X|^-3."""
    sx = ax + bx + cx
    sy = ay + by + cy
    c = 1.0 / ((n + 1.0) * (n + 2.0))
    store(w, row, n + 2, c * (sx - 3.0 * ax))
    store(w, row + 1, n + 2, c * (sy - 3.0 * ay))
    store(w, row + 2, n + 2, c * (sx - 3.0 * bx))
    store(w, row + 3, n + 2, c * (sy - 3.0 * by))
    store(w, row + 4, n + 2, c * (sx - 3.0 * cx))
    store(w, row + 5, n + 2, c * (sy - 3.0 * cy))


@_inlined
def _put_gradient(w, p, n, uxx, uxy):
    """Store order n of G = I |X|^-3 - u X^T; its last entry needs no product of its own.

    3 |X|^2 |X|^-5 = 3 |X|^-3, so u_y y = 3 q - u_x x.
    """
    qn = load(w, Q + p, n)
    store(w, G + 3 * p, n, qn - uxx)
    store(w, G + 3 * p + 1, n, splat(0.0) - uxy)
    store(w, G + 3 * p + 2, n, uxx - 2.0 * qn)


@_inlined
def _gradients(w, n):
    """Order n of the matrices G of all pairs, after `_pair`.

    The pairs share the loop, here and in `_tangent_order`: two sums alone would wait longer for
    their own last additions than for the loads.
    """
    axx = splat(0.0)
    axy = splat(0.0)
    bxx = splat(0.0)
    bxy = splat(0.0)
    cxx = splat(0.0)
    cxy = splat(0.0)
    for k in range(n + 1):
        a = load(w, U, k)
        b = load(w, U + 2, k)
        c = load(w, U + 4, k)
        axx = axx + a * load(w, 0, n - k)
        axy = axy + a * load(w, 1, n - k)
        bxx = bxx + b * load(w, 2, n - k)
        bxy = bxy + b * load(w, 3, n - k)
        cxx = cxx + c * load(w, 4, n - k)
        cxy = cxy + c * load(w, 5, n - k)
    _put_gradient(w, 0, n, axx, axy)
    _put_gradient(w, 1, n, bxx, bxy)
    _put_gradient(w, 2, n, cxx, cxy)


@_inlined
def _tangent_order(w, row, n):
    """Coefficient n + 2 of the tangent whose series start at `row`, from order n of G δX."""
    a0 = splat(0.0)
    a1 = splat(0.0)
    a2 = splat(0.0)
    a3 = splat(0.0)
    b0 = splat(0.0)
    b1 = splat(0.0)
    b2 = splat(0.0)
    b3 = splat(0.0)
    c0 = splat(0.0)
    c1 = splat(0.0)
    c2 = splat(0.0)
    c3 = splat(0.0)
    for k in range(n + 1):
        x = load(w, row, n - k)
        y = load(w, row + 1, n - k)
        g = load(w, G + 1, k)
        a0 = a0 + load(w, G, k) * x
        a1 = a1 + g * y
        a2 = a2 + g * x
        a3 = a3 + load(w, G + 2, k) * y
        x = load(w, row + 2, n - k)
        y = load(w, row + 3, n - k)
        g = load(w, G + 4, k)
        b0 = b0 + load(w, G + 3, k) * x
        b1 = b1 + g * y
        b2 = b2 + g * x
        b3 = b3 + load(w, G + 5, k) * y
        x = load(w, row + 4, n - k)
        y = load(w, row + 5, n - k)
        g = load(w, G + 7, k)
        c0 = c0 + load(w, G + 6, k) * x
        c1 = c1 + g * y
        c2 = c2 + g * x
        c3 = c3 + load(w, G + 8, k) * y
    _extend(w, row, n, a0 + a1, a2 + a3, b0 + b1, b2 + b3, c0 + c1, c2 + c3)


@_inlined
def _first(w, variational):
    """Order 0 of everything that `_pair` computes, and coefficient 2."""
    for p in range(3):
        x = load(w, 2 * p, 0)
        y = load(w, 2 * p + 1, 0)
        s = x * x + y * y
        q = 1.0 / (s * root(s))
        store(w, S + p, 0, s)
        store(w, D + p, 0, splat(0.0))
        store(w, Q + p, 0, q)
        if variational:
            r = q / s
            store(w, P + p, 0, r)
            store(w, U + 2 * p, 0, 3.0 * (x * r))
            store(w, U + 2 * p + 1, 0, 3.0 * (y * r))
    a = load(w, Q, 0)
    b = load(w, Q + 1, 0)
    c = load(w, Q + 2, 0)
    _extend(
        w, 0, 0,
        load(w, 0, 0) * a, load(w, 1, 0) * a,
        load(w, 2, 0) * b, load(w, 3, 0) * b,
        load(w, 4, 0) * c, load(w, 5, 0) * c,
    )  # fmt: skip


@_inlined
def _pairs(w, n, variational):
    """Order n of all pairs, and coefficient n + 2 of the coordinates."""
    ax, ay = _pair(w, 0, n, variational)
    bx, by = _pair(w, 1, n, variational)
    cx, cy = _pair(w, 2, n, variational)
    _extend(w, 0, n, ax, ay, bx, by, cx, cy)


@_jit
def _series(w):
    """Fill coefficients 2..ORDER of the six coordinates from coefficients 0 and 1."""
    _first(w, False)
    for n in range(1, ORDER - 1):
        _pairs(w, n, False)


@_jit
def _tangent_series(w, tangents):
    """The same with the first variational equations δX'' = Σ G δX - 3 G δX of the tangents."""
    _first(w, True)
    for n in range(ORDER - 1):
        if n > 0:
            _pairs(w, n, True)
        _gradients(w, n)
        for i in range(tangents):
            _tangent_order(w, TANGENT + 6 * i, n)


@_inlined
def _inverse_root(x, n):
    """x^(-1/n) of each lane to a percent, by the same arithmetic on every machine.

    The bits of a double read as an integer are 2^52 times its logarithm, the mantissa taken as
    linear; back again, 2^f is 1 + 0.6564 f + 0.3436 f^2 to 0.3 % between whole powers.
    """
    y = (1023.0 - bits(x) * 2.0**-52) * (1.0 / n)
    # Rounds to a whole number: beside 1.5 * 2^52 a double has no room for a fraction.
    whole = (y + 6755399441055744.0) - 6755399441055744.0
    f = y - whole
    below = choose(f, splat(0.0), splat(0.0), splat(1.0))
    whole = whole - below
    f = f + below
    return scale(1.0 + f * (0.6564 + 0.3436 * f), whole)


@_jit
def _natural_steps(w):
    """Step length of each lane into row H: from the last two coefficients, pair by pair.

    Relative to the pair, not to the largest: in a close approach the short side sets the pace, and
    keeps its own digits.  Not squared: at 1e-5 the 20th coefficient is of order 1e155.
    """
    last = splat(0.0)
    before = splat(0.0)
    for p in range(3):
        x, y = 2 * p, 2 * p + 1
        per_length = 1.0 / root(load(w, S + p, 0))
        for row in (x, y):
            now = magnitude(load(w, row, ORDER)) * per_length
            last = choose(last, now, last, now)
            now = magnitude(load(w, row, ORDER - 1)) * per_length
            before = choose(before, now, before, now)
    one = _inverse_root(last, ORDER)
    other = _inverse_root(before, ORDER - 1)
    store(w, H, 0, SAFETY * choose(one, other, other, one))


@_inlined
def _advance(w, rows):
    """Move `rows` series (starting at 0, then at TANGENT) to the end of the step in row H."""
    h = load(w, H, 0)
    for i in range(0, rows, 2):
        row = i if i < 6 else TANGENT + i - 6
        x = load(w, row, ORDER)
        y = load(w, row + 1, ORDER)
        u = splat(0.0)
        v = splat(0.0)
        for k in range(ORDER - 1, -1, -1):
            u = u * h + x
            v = v * h + y
            x = x * h + load(w, row, k)
            y = y * h + load(w, row + 1, k)
        store(w, row, 0, x)
        store(w, row, 1, u)
        store(w, row + 1, 0, y)
        store(w, row + 1, 1, v)


@_jit
def _close_triangles(w, tangents):
    """Restore A + B + C = 0: the longest side becomes minus the sum of the others.

    Rounding alone moves the sum by an ulp a step, which then drifts; left alone it spoilt the
    figure-eight by 2e-4 within 1,000 periods.  The least squared side goes to row H on the way.
    """
    a = load(w, 0, 0) * load(w, 0, 0) + load(w, 1, 0) * load(w, 1, 0)
    b = load(w, 2, 0) * load(w, 2, 0) + load(w, 3, 0) * load(w, 3, 0)
    c = load(w, 4, 0) * load(w, 4, 0) + load(w, 5, 0) * load(w, 5, 0)
    longest = choose(a, b, a, b)
    longest = choose(longest, c, longest, c)
    least = choose(a, b, b, a)
    store(w, H, 1, choose(least, c, c, least))
    zero = splat(0.0)
    for block in range(tangents + 1):
        row = 0 if block == 0 else TANGENT + 6 * (block - 1)
        for axis in range(2):
            for term in range(2):
                # One after the other: of two equally long sides only the first is changed.
                x = load(w, row + axis, term)
                y = load(w, row + 2 + axis, term)
                z = load(w, row + 4 + axis, term)
                x = choose(a, longest, zero - (y + z), x)
                y = choose(b, longest, zero - (z + x), y)
                z = choose(c, longest, zero - (x + y), z)
                store(w, row + axis, term, x)
                store(w, row + 2 + axis, term, y)
                store(w, row + 4 + axis, term, z)


# ---------------------------------------------------------------- events


@_jit
def _power_rate(x, y, u, v, fx, fy, q, s):
    """Value and rate of X·X' |X|^-3 for one pair; (fx, fy) is its second derivative."""
    d = x * u + y * v
    return d * q, (u * u + v * v + x * fx + y * fy) * q - 3.0 * d * d * q / s


@_jit
def _event(e, ax, ay, bx, by, cx, cy, au, av, bu, bv, cu, cv):
    """Value and rate of event function e; works on numbers and on lane vectors alike."""
    if e == 0:
        return ax * by - ay * bx, au * by - av * bx + ax * bv - ay * bu
    a = ax * ax + ay * ay
    b = bx * bx + by * by
    c = cx * cx + cy * cy
    da = ax * au + ay * av
    db = bx * bu + by * bv
    dc = cx * cu + cy * cv
    if e == 1:
        return a - c, 2.0 * (da - dc)
    if e == 2:
        return b - a, 2.0 * (db - da)
    if e == 3:
        return c - b, 2.0 * (dc - db)
    qa = 1.0 / (a * root(a))
    qb = 1.0 / (b * root(b))
    qc = 1.0 / (c * root(c))
    sx = ax * qa + bx * qb + cx * qc
    sy = ay * qa + by * qb + cy * qc
    if e == 4:
        # K' = U' = -Σ X·X' |X|^-3: energy is conserved, so no acceleration is needed for the value.
        fa, ra = _power_rate(ax, ay, au, av, sx - 3.0 * ax * qa, sy - 3.0 * ay * qa, qa, a)
        fb, rb = _power_rate(bx, by, bu, bv, sx - 3.0 * bx * qb, sy - 3.0 * by * qb, qb, b)
        fc, rc = _power_rate(cx, cy, cu, cv, sx - 3.0 * cx * qc, sy - 3.0 * cy * qc, qc, c)
        zero = fa - fa
        return zero - (fa + fb + fc), zero - (ra + rb + rc)
    if e == 5:
        return da, au * au + av * av + ax * (sx - 3.0 * ax * qa) + ay * (sy - 3.0 * ay * qa)
    if e == 6:
        return db, bu * bu + bv * bv + bx * (sx - 3.0 * bx * qb) + by * (sy - 3.0 * by * qb)
    return dc, cu * cu + cv * cv + cx * (sx - 3.0 * cx * qc) + cy * (sy - 3.0 * cy * qc)


@_jit
def _state_at(c, h, x):
    """State x, shape (12,), at h from the expansion point of series c, shape (6+, TERMS)."""
    for row in range(6):
        value = c[row, ORDER]
        rate = 0.0
        for k in range(ORDER - 1, -1, -1):
            rate = rate * h + value
            value = value * h + c[row, k]
        x[row] = value
        x[row + 6] = rate


@_jit
def _event_at(c, h, e, x):
    _state_at(c, h, x)
    return _event(e, x[0], x[1], x[2], x[3], x[4], x[5], x[6], x[7], x[8], x[9], x[10], x[11])


@_jit
def _root_between(c, e, lo, flo, hi, fhi, x):
    """Root of event function e between lo and hi: Newton kept inside a shrinking bracket.

    The first trial is the secant point; each is checked against the bracket and replaced by its
    middle when it falls outside.  Newton's error is the square of its last correction, so one of
    1e-8 of the bracket is the last that can matter; a middle promises nothing of the kind, even
    when the bracket is that small.  x is scratch.
    """
    h = lo - flo * (hi - lo) / (fhi - flo)
    width = abs(hi - lo)
    for _ in range(60):
        f, rate = _event_at(c, h, e, x)
        if f == 0.0:
            return h
        if (f < 0.0) == (flo < 0.0):
            lo = h
            flo = f
        else:
            hi = h
        trial = h - f / rate
        inside = min(lo, hi) <= trial <= max(lo, hi)
        if not inside:
            trial = 0.5 * (lo + hi)
        moved = abs(trial - h)
        h = trial
        if moved <= (1e-8 if inside else 1e-15) * width:
            break
    return h


@_jit
def _turn_between(c, e, h, d0, d1, f0, x):
    """A point inside (0, h) where event function e has crossed zero and will cross back, or 0.

    Called when both ends have one sign but the function heads for zero at both: halve the interval
    on the sign of the rate until the extremum is found or the sign changes.
    """
    lo = 0.0
    hi = h
    for _ in range(40):
        middle = 0.5 * (lo + hi)
        f, rate = _event_at(c, middle, e, x)
        if (f < 0.0) != (f0 < 0.0):
            return middle
        if (rate < 0.0) == (d0 < 0.0):
            lo = middle
        else:
            hi = middle
        # The function cannot reach zero any more on what is left of the interval.
        if abs(f) > 2.0 * max(abs(d0), abs(d1), abs(rate)) * abs(hi - lo):
            return 0.0
    return 0.0


@_jit
def _roots(c, e, h, f0, d0, f1, d1, x, out):
    """Roots of event function e in (0, h], at most two, into out; returns their number.

    f0 == 0 means that the step starts on the root itself (a start in its own set): not reported.
    """
    if f0 == 0.0:
        return 0
    if f1 == 0.0 or (f0 < 0.0) != (f1 < 0.0):
        out[0] = _root_between(c, e, 0.0, f0, h, f1, x) if f1 != 0.0 else h
        return 1
    s = 1.0 if h > 0.0 else -1.0
    if f0 * d0 * s < 0.0 and f1 * d1 * s > 0.0:
        middle = _turn_between(c, e, h, d0, d1, f0, x)
        if middle != 0.0:
            fm, _ = _event_at(c, middle, e, x)
            out[0] = _root_between(c, e, 0.0, f0, middle, fm, x)
            out[1] = _root_between(c, e, middle, fm, h, f1, x)
            return 2
    return 0


@_jit
def _longest_side(x):
    """Index of the longest of A, B, C."""
    a = x[0] ** 2 + x[1] ** 2
    b = x[2] ** 2 + x[3] ** 2
    c = x[4] ** 2 + x[5] ** 2
    if a >= b and a >= c:
        return 0
    return 1 if b >= c else 2


@_jit
def _kind_and_residuals(e, x):
    """Kind of an event and the two residuals that vanish when its state is fixed by a reversal.

    Kinds 1..3: that body is between the others (residuals: half-sides, radial rate of the outer
    pair); 4..6: body kind-3 is the apex (its rate across the base, rate of the base); 7: kinetic
    energy is least (rates of A and B).  Kind 8, in line with velocities at right angles, has the
    residuals of kind 7 at the events of kinds 1..3.  All are free of scale: lengths over the size,
    r·v over its square root.
    The side opposite to body k is A, B, C for k = 3, 1, 2.
    """
    size = math.sqrt(x[0] ** 2 + x[1] ** 2 + x[2] ** 2 + x[3] ** 2 + x[4] ** 2 + x[5] ** 2)
    unit = 1.0 / math.sqrt(size)
    if e >= 4:
        kind = 7 if e == 4 else 8
        return kind, (x[0] * x[6] + x[1] * x[7]) * unit, (x[2] * x[8] + x[3] * x[9]) * unit
    side = _longest_side(x) if e == 0 else e % 3
    i = 2 * side
    j = (i + 2) % 6
    k = (i + 4) % 6
    base = (x[i] * x[i + 6] + x[i + 1] * x[i + 7]) * unit
    body = 3 if side == 0 else side
    if e == 0:
        near = math.sqrt(x[j] ** 2 + x[j + 1] ** 2)
        far = math.sqrt(x[k] ** 2 + x[k + 1] ** 2)
        return body, (near - far) / size, base
    # v_k = (X_j' - X_k') / 3 with X_j, X_k the sides after and before the base.
    across = x[i] * (x[j + 7] - x[k + 7]) - x[i + 1] * (x[j + 6] - x[k + 6])
    return 3 + body, across * unit / 3.0, base


@_jit
def _escapes(x):
    """Whether one body leaves a binary for good.

    Conservative two-body test: the body is farther than five times the binary can stretch, and its
    radial speed alone exceeds the escape speed by a margin that covers the quadrupole of the pair.
    """
    closest = 0
    least = np.inf
    most = 0.0
    for p in range(3):
        s = x[2 * p] ** 2 + x[2 * p + 1] ** 2
        most = max(most, s)
        if s < least:
            least = s
            closest = p
    if most < ESCAPE_RATIO2 * least:
        return False
    i = 2 * closest
    j = (i + 2) % 6
    k = (i + 4) % 6
    binding = 2.0 / math.sqrt(least) - 0.5 * (x[i + 6] ** 2 + x[i + 7] ** 2)
    if binding <= 0.0:
        return False
    dx = 0.5 * (x[j] - x[k])
    dy = 0.5 * (x[j + 1] - x[k + 1])
    distance = math.sqrt(dx * dx + dy * dy)
    if distance * binding < 2.0 * ESCAPE_DISTANCE:
        return False
    rate = (dx * 0.5 * (x[j + 6] - x[k + 6]) + dy * 0.5 * (x[j + 7] - x[k + 7])) / distance
    return rate > 0.0 and 0.5 * rate * rate > ESCAPE_MARGIN * 3.0 / distance


# ---------------------------------------------------------------- drivers


def workspace(tangents: int = 0) -> NDArray[np.float64]:
    """Zeroed workspace for `flow` with that many tangents, shape (rows, TERMS, LANES), aligned."""
    rows = TANGENT + 6 * tangents if tangents else H + 1
    count = rows * TERMS * LANES
    raw = np.zeros(count + LANES)
    offset = (-raw.ctypes.data // 8) % LANES
    return raw[offset : offset + count].reshape(rows, TERMS, LANES)


@_jit
def _park(w, lane, tangents):
    """Give an idle lane a harmless state, three bodies at rest in an equilateral triangle."""
    for row in range(6 + 6 * tangents):
        r = row if row < 6 else TANGENT + row - 6
        w[r, 0, lane] = 0.0
        w[r, 1, lane] = 0.0
    w[0, 0, lane] = 1.0
    w[2, 0, lane] = -0.5
    w[3, 0, lane] = math.sqrt(0.75)
    w[4, 0, lane] = -0.5
    w[5, 0, lane] = -math.sqrt(0.75)


@_jit
def _put(w, lane, x):
    for row in range(6):
        w[row, 0, lane] = x[row]
        w[row, 1, lane] = x[row + 6]


@_jit
def _get(w, lane, x):
    for row in range(6):
        x[row] = w[row, 0, lane]
        x[row + 6] = w[row, 1, lane]


@_jit
def flow(w, x, d, times, nearest, max_steps, status, steps):
    """Carry n states, and m tangents of each, over their own times; results replace the inputs.

    Parameters
    ----------
    w : array from `workspace`
    x : array, shape (n, 12)
    d : array, shape (n, m, 12)
        Tangent vectors; m = 0 for none.
    times : array, shape (n,)
        May be negative.
    nearest : array, shape (n,)
        A pair closer than this ends the start with STATUS_COLLISION.
    max_steps : int
    status, steps : integer arrays, shape (n,), filled.
    """
    n = x.shape[0]
    m = d.shape[1]
    who = np.full(LANES, -1, np.int64)
    now = np.zeros(LANES)
    lost = np.zeros(LANES)
    following = 0
    running = 0
    for lane in range(LANES):
        _park(w, lane, m)
    while True:
        for lane in range(LANES):
            while who[lane] < 0 and following < n:
                status[following] = STATUS_DONE
                steps[following] = 0
                if times[following] != 0.0:
                    who[lane] = following
                    running += 1
                    now[lane] = 0.0
                    lost[lane] = 0.0
                    _put(w, lane, x[following])
                    for i in range(m):
                        for row in range(6):
                            w[TANGENT + 6 * i + row, 0, lane] = d[following, i, row]
                            w[TANGENT + 6 * i + row, 1, lane] = d[following, i, row + 6]
                following += 1
        if running == 0:
            return
        if m > 0:
            _tangent_series(w, m)
        else:
            _series(w)
        _natural_steps(w)
        for lane in range(LANES):
            i = who[lane]
            if i < 0:
                w[H, 0, lane] = 0.0
                continue
            h = w[H, 0, lane]
            left = (times[i] - now[lane]) + lost[lane]
            if not h < abs(left):
                w[H, 0, lane] = left
                steps[i] = -steps[i] - 1
                continue
            w[H, 0, lane] = h if left > 0.0 else -h
            steps[i] += 1
        _advance(w, 6 + 6 * m)
        _close_triangles(w, m)
        for lane in range(LANES):
            i = who[lane]
            if i < 0:
                continue
            # Kahan's sum: `lost` is what the rounded clock is ahead of the true one.
            h = w[H, 0, lane] - lost[lane]
            clock = now[lane] + h
            lost[lane] = (clock - now[lane]) - h
            now[lane] = clock
            done = steps[i] < 0
            if done:
                steps[i] = -steps[i]
            # Negated, so that a state of NaN (two bodies in one place) counts as well.
            if not w[H, 1, lane] >= nearest[i] ** 2:
                status[i] = STATUS_COLLISION
                done = True
            if not done and steps[i] >= max_steps:
                status[i] = STATUS_BUDGET
                done = True
            if done:
                _get(w, lane, x[i])
                for j in range(m):
                    for row in range(6):
                        d[i, j, row] = w[TANGENT + 6 * j + row, 0, lane]
                        d[i, j, row + 6] = w[TANGENT + 6 * j + row, 1, lane]
                _park(w, lane, m)
                who[lane] = -1
                running -= 1


# Rows of the event table of `scan`: values and rates after the step, and before it.
NEW, NEW_RATE, OLD, OLD_RATE = 0, 1, 2, 3


@_jit
def _start_events(lane, x, table):
    """Event functions of a fresh start; one that is zero up to rounding is set to exactly zero."""
    size = 0.0
    speed = 0.0
    for row in range(6):
        size += x[row] ** 2
        speed += x[row + 6] ** 2
    for e in range(SCAN_EVENTS):
        value, slope = _event(
            e, x[0], x[1], x[2], x[3], x[4], x[5], x[6], x[7], x[8], x[9], x[10], x[11]
        )
        scale = size if e < 4 else math.sqrt(speed) / size
        table[NEW, e, lane] = value if abs(value) > 1e-12 * scale else 0.0
        table[NEW_RATE, e, lane] = slope


@_jit
def _step_events(w, table):
    """Event functions of all lanes after a step; those before it move to the old rows."""
    ax, ay, bx, by, cx, cy = (
        load(w, 0, 0), load(w, 1, 0), load(w, 2, 0), load(w, 3, 0), load(w, 4, 0), load(w, 5, 0)
    )  # fmt: skip
    au, av, bu, bv, cu, cv = (
        load(w, 0, 1), load(w, 1, 1), load(w, 2, 1), load(w, 3, 1), load(w, 4, 1), load(w, 5, 1)
    )  # fmt: skip
    for e in range(SCAN_EVENTS):
        store(table, OLD, e, load(table, NEW, e))
        store(table, OLD_RATE, e, load(table, NEW_RATE, e))
        value, slope = _event(e, ax, ay, bx, by, cx, cy, au, av, bu, bv, cu, cv)
        store(table, NEW, e, value)
        store(table, NEW_RATE, e, slope)


@_jit
def _expansion(w, before, lane, series):
    """Series of one lane over the last step; its coefficients 0 and 1 were saved before it."""
    for row in range(6):
        series[row, 0] = before[row, 0, lane]
        series[row, 1] = before[row, 1, lane]
        for k in range(2, TERMS):
            series[row, k] = w[row, k, lane]


@_jit
def _may_vanish(table, e, lane):
    """Whether event function e may have a root in the last step of a lane."""
    f0 = table[OLD, e, lane]
    f1 = table[NEW, e, lane]
    if f0 == 0.0:
        return False
    if (f0 < 0.0) != (f1 < 0.0):
        return True
    return f0 * table[OLD_RATE, e, lane] < 0.0 and f1 * table[NEW_RATE, e, lane] > 0.0


@_jit
def _record(series, e, lane, table, start, h, end, state, roots, count, kinds, when, first, second):
    """Append the roots of event function e in a step to the events of a start; the new count.

    An alignment is looked at twice, as a collinear and as a perpendicular state.  Kinetic energy
    counts where it is least.  A count beyond the capacity says that events were lost.
    """
    found = _roots(
        series, e, h, table[OLD, e, lane], table[OLD_RATE, e, lane],
        table[NEW, e, lane], table[NEW_RATE, e, lane], state, roots,
    )  # fmt: skip
    for r in range(found):
        t = start + roots[r]
        _, slope = _event_at(series, roots[r], e, state)
        if t > end or (e == 4 and slope < 0.0):
            continue
        for view in (e, EVENTS):
            if view == EVENTS and e > 0:
                continue
            if count >= kinds.shape[0]:
                return kinds.shape[0] + 1
            kind, r1, r2 = _kind_and_residuals(view, state)
            kinds[count] = kind
            when[count] = t
            first[count] = r1
            second[count] = r2
            count += 1
    return count


@_jit
def _lane_status(state, least, nearest, steps, max_steps):
    """STATUS_DONE while a start may go on, else why it must end."""
    # Written so that NaN, from a passage through a collision, is one too.
    if not least >= nearest**2:
        return STATUS_COLLISION
    if _escapes(state):
        return STATUS_ESCAPE
    return STATUS_BUDGET if steps >= max_steps else STATUS_DONE


@_jit
def _least_square(x):
    """Least squared side of a state."""
    least = np.inf
    for p in range(3):
        least = min(least, x[2 * p] ** 2 + x[2 * p + 1] ** 2)
    return least


@_jit
def scan(w, x, times, nearest, max_steps, status, steps, counts, kinds, when, first, second):
    """Carry n starts to their times and record every event on the way; results replace the inputs.

    Parameters
    ----------
    w, max_steps, status, steps
        As for `flow`.  Starts that escape end with STATUS_ESCAPE.
    x : array, shape (n, 12)
        Replaced by the last states.
    times : array, shape (n,)
        Positive.  Replaced by the times reached: the same, or the end of the step that ended the
        start.
    nearest : array, shape (n,)
        As for `flow`.  Replaced by the least side seen, at the start and at the ends of steps.  A
        close passage takes several steps: measured, this is up to 0.3 % above the true least side.
    counts : integer array, shape (n,)
        Number of events of each start, filled.
    kinds, when, first, second : arrays, shape (n, capacity)
        Kind, time and the two residuals of each event (see `_kind_and_residuals`) in the order of
        the steps, filled.  A start whose events pass the capacity ends with STATUS_BUDGET.
    """
    n = x.shape[0]
    who = np.full(LANES, -1, np.int64)
    now = np.zeros(LANES)
    closest = np.zeros(LANES)
    table = np.zeros((4, SCAN_EVENTS, LANES))
    series = np.zeros((6, TERMS))
    state = np.zeros(12)
    roots = np.zeros(2)
    following = 0
    running = 0
    for lane in range(LANES):
        _park(w, lane, 0)
    while True:
        for lane in range(LANES):
            if who[lane] < 0 and following < n:
                i = following
                who[lane] = i
                steps[i] = 0
                counts[i] = 0
                now[lane] = 0.0
                _put(w, lane, x[i])
                _start_events(lane, x[i], table)
                closest[lane] = _least_square(x[i])
                running += 1
                following += 1
        if running == 0:
            return
        _series(w)
        _natural_steps(w)
        for lane in range(LANES):
            if who[lane] < 0:
                w[H, 0, lane] = 0.0
        before = w[:6, :2].copy()
        _advance(w, 6)
        _close_triangles(w, 0)
        _step_events(w, table)
        for lane in range(LANES):
            i = who[lane]
            if i < 0:
                continue
            h = w[H, 0, lane]
            steps[i] += 1
            copied = False
            for e in range(SCAN_EVENTS):
                if not _may_vanish(table, e, lane):
                    continue
                if not copied:
                    _expansion(w, before, lane, series)
                    copied = True
                counts[i] = _record(
                    series, e, lane, table, now[lane], h, times[i], state, roots,
                    counts[i], kinds[i], when[i], first[i], second[i],
                )  # fmt: skip
            now[lane] += h
            # False for NaN, which a passage through a collision leaves.
            if w[H, 1, lane] < closest[lane]:
                closest[lane] = w[H, 1, lane]
            _get(w, lane, state)
            status[i] = _lane_status(state, w[H, 1, lane], nearest[i], steps[i], max_steps)
            if counts[i] > kinds.shape[1]:
                counts[i] = kinds.shape[1]
                status[i] = STATUS_BUDGET
            # The time may be up in the same step that ends the start for another reason; a
            # collision still counts, for it may have spoilt the step.
            if now[lane] >= times[i] and status[i] != STATUS_COLLISION:
                status[i] = STATUS_DONE
            elif status[i] == STATUS_DONE:
                continue
            x[i] = state
            # NaN where two bodies begin in one place: that start got nowhere.
            reached = now[lane] if now[lane] >= 0.0 else 0.0
            times[i] = min(times[i], reached)
            nearest[i] = math.sqrt(closest[lane])
            _park(w, lane, 0)
            who[lane] = -1
            running -= 1


@_jit
def track(w, x, time, nearest, times, series):
    """Carry one state over a positive time and keep the series of every step.

    Parameters
    ----------
    x : array, shape (12,)
        Replaced by the last state.
    times : array, shape (steps + 1,)
        Filled with the ends of the steps.
    series : array, shape (steps, 6, TERMS)
        Filled with the coefficients of A, B, C at the beginning of each step.

    Returns
    -------
    steps : int
    status : int
    """
    for lane in range(LANES):
        _park(w, lane, 0)
        w[H, 0, lane] = 0.0
    _put(w, 0, x)
    times[0] = 0.0
    lost = 0.0
    n = 0
    status = STATUS_BUDGET
    while n < series.shape[0]:
        _series(w)
        series[n] = w[:6, :, 0]
        _natural_steps(w)
        h = w[H, 0, 0]
        left = (time - times[n]) + lost
        last = not h < left
        w[H, 0, 0] = left if last else h
        _advance(w, 6)
        _close_triangles(w, 0)
        _get(w, 0, x)
        h = w[H, 0, 0] - lost
        times[n + 1] = times[n] + h
        lost = (times[n + 1] - times[n]) - h
        n += 1
        if last:
            times[n] = time
            status = STATUS_DONE
        if not w[H, 1, 0] >= nearest**2:
            status = STATUS_COLLISION
        if last or status == STATUS_COLLISION:
            break
        if _escapes(x):
            status = STATUS_ESCAPE
            break
    return n, status


@_jit
def dense(times, series, at, out):
    """States at the times `at`, shape (k,), of a tracked arc, into out, shape (k, 12)."""
    n = series.shape[0]
    for i in range(at.shape[0]):
        step = min(max(np.searchsorted(times, at[i], side="right") - 1, 0), n - 1)
        _state_at(series[step], at[i] - times[step], out[i])


@_jit
def track_events(times, series, capacity):
    """Every event of a tracked arc, all EVENTS functions, in the order of the steps.

    A function that is zero up to rounding at the beginning of the arc has no event there.

    Returns
    -------
    functions : integer array, shape (k,)
        Number of the event function (see EVENTS).
    when : array, shape (k,)
    states : array, shape (k, 12)
    rates : array, shape (k,)
        Rate of the event function at its root; the sign gives the direction.
    """
    functions = np.zeros(capacity, np.int64)
    when = np.zeros(capacity)
    states = np.zeros((capacity, 12))
    rates = np.zeros(capacity)
    f = np.zeros((EVENTS, 2))
    rate = np.zeros((EVENTS, 2))
    state = np.zeros(12)
    roots = np.zeros(2)
    count = 0
    for n in range(series.shape[0]):
        h = times[n + 1] - times[n]
        for e in range(EVENTS):
            if n == 0:
                f[e, 0], rate[e, 0] = _event_at(series[n], 0.0, e, state)
                bound = 1e-12 * np.sum(state[:6] ** 2)
                if e == 4:
                    bound = 1e-12 * math.sqrt(np.sum(state[6:] ** 2)) / np.sum(state[:6] ** 2)
                if e > 4:
                    bound = 1e-12 * math.sqrt(np.sum(state[:6] ** 2))
                if abs(f[e, 0]) <= bound:
                    f[e, 0] = 0.0
            f[e, 1], rate[e, 1] = _event_at(series[n], h, e, state)
            found = _roots(series[n], e, h, f[e, 0], rate[e, 0], f[e, 1], rate[e, 1], state, roots)
            for r in range(found):
                if count < capacity:
                    _, rates[count] = _event_at(series[n], roots[r], e, state)
                    functions[count] = e
                    when[count] = times[n] + roots[r]
                    states[count] = state
                    count += 1
            f[e, 0] = f[e, 1]
            rate[e, 0] = rate[e, 1]
    return functions[:count], when[:count], states[:count], rates[:count]


def is_cached():
    """Whether compiled code of the scan is already on disk (a guess, for telling users to wait)."""
    cache = getattr(getattr(scan, "_cache", None), "cache_path", None)
    return cache is None or any(Path(cache).glob("_kernels.scan-*.nbi"))
