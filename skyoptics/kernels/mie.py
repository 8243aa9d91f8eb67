"""Partial-wave sums of a sphere: Riccati–Bessel functions, Mie coefficients, angular sums in lanes.

Conventions of Bohren & Huffman, *Absorption and Scattering of Light by Small Particles* (1983), chapter 4: time factor
exp(−iωt), index m = n + ik with k ≥ 0, ψ = x j, χ = −x y, ξ = ψ − iχ.

Angular functions run as a recurrence in differences (after Reinsch, as told in Stoer & Bulirsch, *Introduction to
Numerical Analysis*, from memory) with w = 1 − |cos θ|, which is exact near the axis. It costs as much as the plain
recurrence and keeps the forward and backward peaks to a few roundings at any order. For cos θ < 0 the parity
π_n(−µ) = (−1)^(n−1) π_n(µ), τ_n(−µ) = (−1)^n τ_n(µ) goes into the coefficients, so one kernel serves both halves.
"""

from __future__ import annotations

from typing import TypeAlias

import numpy as np
from llvmlite import ir  # type: ignore[import-untyped]
from numba import njit, types
from numba.extending import intrinsic, overload
from numpy.typing import NDArray

Reals: TypeAlias = NDArray[np.float64]
Complexes: TypeAlias = NDArray[np.complex128]

TILE = 256
"""Angles summed at a time: state and sums (6 rows) stay in the first-level cache."""
BLOCK = 64
"""Orders added up before they join the sum."""
UNROLL = 4
"""Orders taken at each visit of a lane; coefficient rows are padded with zeros to a multiple of it."""


def multiply_add(a: float, b: float, c: float) -> float:
    """Return a·b + c, fused where the machine can."""
    return a * b + c


@intrinsic
def _fmuladd(typingctx, a, b, c):  # type: ignore[no-untyped-def]
    """Wrap LLVM's llvm.fmuladd.f64, which fuses where that is fast and splits elsewhere."""

    def codegen(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        double = ir.DoubleType()
        function = builder.module.declare_intrinsic("llvm.fmuladd", [double], ir.FunctionType(double, [double] * 3))
        return builder.call(function, arguments)

    return types.float64(types.float64, types.float64, types.float64), codegen


@overload(multiply_add, inline="always")
def _multiply_add(a, b, c):  # type: ignore[no-untyped-def]
    def implementation(a, b, c):  # type: ignore[no-untyped-def]
        return _fmuladd(a, b, c)  # type: ignore[call-arg]

    return implementation


@njit(cache=True, nogil=True, error_model="numpy")
def riccati_bessel(x: float, psi: Reals, chi: Reals) -> None:
    """Fill ψ_n(x) and χ_n(x), n = 0 … len − 1, x real.

    Both climb while n ≤ x; above, ψ comes from the ratios ψ_n/ψ_{n−1} taken downwards, since climbing loses it.
    """
    count = len(psi)
    psi[0] = np.sin(x)
    chi[0] = np.cos(x)
    turn = min(count - 1, int(x))
    if turn >= 1:
        psi[1] = psi[0] / x - chi[0]
    if count > 1:
        chi[1] = chi[0] / x + psi[0]
    for n in range(2, turn + 1):
        psi[n] = (2 * n - 1) / x * psi[n - 1] - psi[n - 2]
    for n in range(2, count):
        chi[n] = (2 * n - 1) / x * chi[n - 1] - chi[n - 2]
    ratio = 0.0
    for n in range(count - 1 + 40 + int(8.0 * x ** (1.0 / 3.0)), turn, -1):
        ratio = 1.0 / ((2 * n + 1) / x - ratio)
        if n < count:
            psi[n] = ratio
    for n in range(turn + 1, count):
        psi[n] *= psi[n - 1]


@njit(cache=True, nogil=True, error_model="numpy")
def logarithmic_derivative(z: complex, derivative: Complexes) -> None:
    """Fill D_n(z) = ψ_n'(z)/ψ_n(z), n = 0 … len − 1, downwards (Bohren & Huffman eq. 4.89).

    Starts 16 |z|^(1/3) + 100 orders above |z|: starting 50 above gives wrong Q_sca at x = 10⁴. Nothing above len is kept.
    """
    count = len(derivative)
    size = abs(z)
    top = max(count, int(size)) + 16 * int(size ** (1.0 / 3.0)) + 100
    inverse = 1.0 / z
    current = 0.0j
    for n in range(top, 0, -1):
        order = n * inverse
        if z.imag == 0.0:
            order = complex(n / z.real, 0.0)  # n·(1/z) would shift the phase by |z| roundings
        total = current + order
        scale = 1.0 / (total.real * total.real + total.imag * total.imag)
        current = complex(order.real - total.real * scale, order.imag + total.imag * scale)
        if n <= count:
            derivative[n - 1] = current


@njit(cache=True, nogil=True, error_model="numpy")
def mie_coefficients(m: complex, x: float, a: Complexes, b: Complexes) -> None:
    """Fill a_n, b_n, n = 1 … len (index n − 1), Bohren & Huffman eq. 4.88."""
    count = len(a)
    psi = np.empty(count + 1)
    chi = np.empty(count + 1)
    derivative = np.empty(count + 1, dtype=np.complex128)
    riccati_bessel(x, psi, chi)
    logarithmic_derivative(m * x, derivative)
    inverse = 1.0 / m
    for n in range(1, count + 1):
        order = n / x
        for magnetic in range(2):
            factor = derivative[n] * m if magnetic else derivative[n] * inverse
            factor = complex(factor.real + order, factor.imag)
            upper = complex(factor.real * psi[n] - psi[n - 1], factor.imag * psi[n])
            other = complex(factor.real * chi[n] - chi[n - 1], factor.imag * chi[n])
            lower = complex(upper.real + other.imag, upper.imag - other.real)
            scale = 1.0 / (lower.real * lower.real + lower.imag * lower.imag)
            value = complex(
                (upper.real * lower.real + upper.imag * lower.imag) * scale,
                (upper.imag * lower.real - upper.real * lower.imag) * scale,
            )
            if magnetic:
                b[n - 1] = value
            else:
                a[n - 1] = value


@njit(cache=True, nogil=True, error_model="numpy")
def mie_efficiencies(a: Complexes, b: Complexes, x: float) -> tuple[float, float, float, complex]:
    """Return Q_ext, Q_sca, g Q_sca (Bohren & Huffman eq. 4.61, 4.62 and p. 120) and Σ (2n+1)(−1)^n (a_n − b_n)."""
    extinction = 0.0
    scattering = 0.0
    asymmetry = 0.0
    back = 0.0j
    sign = 1.0
    for n in range(len(a), 0, -1):  # small terms first
        e = a[n - 1]
        h = b[n - 1]
        weight = 2.0 * n + 1.0
        extinction += weight * (e.real + h.real)
        scattering += weight * (e.real * e.real + e.imag * e.imag + h.real * h.real + h.imag * h.imag)
        asymmetry += weight / (n * (n + 1.0)) * (e.real * h.real + e.imag * h.imag)
        if n < len(a):
            e2 = a[n]
            h2 = b[n]
            both = e.real * e2.real + e.imag * e2.imag + h.real * h2.real + h.imag * h2.imag
            asymmetry += n * (n + 2.0) / (n + 1.0) * both
        sign = -1.0 if n % 2 else 1.0
        back += sign * weight * (e - h)
    scale = 2.0 / (x * x)
    return scale * extinction, scale * scattering, 2.0 * scale * asymmetry, back


@njit(cache=True, nogil=True, error_model="numpy")
def fold_coefficients(a: Complexes, b: Complexes, backward: bool, rows: Reals) -> None:
    """Fill rows (4, padded): the factors of π+τ (real, imaginary) and of π−τ for S1+S2 and S1−S2.

    Forward half: (π+τ) carries f (a+b) → S1+S2, (π−τ) carries f (a−b) → S1−S2, f = (2n+1)/(n(n+1)) (Wiscombe 1980,
    eq. 2). Backward half, at −µ: parity swaps the two and alternates the sign.
    """
    rows[:] = 0.0
    for n in range(1, len(a) + 1):
        factor = (2.0 * n + 1.0) / (n * (n + 1.0))
        if backward and n % 2 == 0:
            factor = -factor
        plus = factor * (a[n - 1] + b[n - 1])
        minus = factor * (a[n - 1] - b[n - 1])
        if backward:
            plus, minus = minus, plus
        rows[0, n - 1] = plus.real
        rows[1, n - 1] = plus.imag
        rows[2, n - 1] = minus.real
        rows[3, n - 1] = minus.imag


@njit(cache=True, nogil=True, error_model="numpy")
def sum_tile(rows: Reals, state: Reals, lanes: int) -> None:
    """Sum Σ rows·(π+τ), Σ rows·(π−τ) over all orders for one tile of angles.

    state (11·TILE,): w, π, δ (scratch); the sums: (π+τ) real, imaginary, (π−τ) real, imaginary; their parts over BLOCK
    orders, so that thousands of terms do not round against the whole sum. Per order u = wπ, t = δ − u, π+τ = n t + δ,
    π−τ = 2π − (π+τ), δ' = t/n + (t − u), π' = π + δ' (exact integers at w = 0). Four orders a visit keep the state in
    registers (measured: 1.5 times as fast as one), fused multiply–add gives a factor of 1.6.
    """
    for lane in range(lanes):
        state[TILE + lane] = 1.0
        state[2 * TILE + lane] = 1.0
        for row in range(3, 11):
            state[row * TILE + lane] = 0.0
    for first in range(0, rows.shape[1], UNROLL):
        n1 = first + 1.0
        n2 = first + 2.0
        n3 = first + 3.0
        n4 = first + 4.0
        r1 = 1.0 / n1
        r2 = 1.0 / n2
        r3 = 1.0 / n3
        r4 = 1.0 / n4
        p1r, p1i, q1r, q1i = rows[0, first], rows[1, first], rows[2, first], rows[3, first]
        p2r, p2i, q2r, q2i = rows[0, first + 1], rows[1, first + 1], rows[2, first + 1], rows[3, first + 1]
        p3r, p3i, q3r, q3i = rows[0, first + 2], rows[1, first + 2], rows[2, first + 2], rows[3, first + 2]
        p4r, p4i, q4r, q4i = rows[0, first + 3], rows[1, first + 3], rows[2, first + 3], rows[3, first + 3]
        for lane in range(lanes):
            w = state[lane]
            pi = state[TILE + lane]
            delta = state[2 * TILE + lane]
            plus_real = state[7 * TILE + lane]
            plus_imag = state[8 * TILE + lane]
            minus_real = state[9 * TILE + lane]
            minus_imag = state[10 * TILE + lane]

            u = w * pi
            t = delta - u
            plus = multiply_add(n1, t, delta)
            minus = multiply_add(2.0, pi, -plus)
            plus_real = multiply_add(p1r, plus, plus_real)
            plus_imag = multiply_add(p1i, plus, plus_imag)
            minus_real = multiply_add(q1r, minus, minus_real)
            minus_imag = multiply_add(q1i, minus, minus_imag)
            delta = multiply_add(r1, t, t - u)
            pi = pi + delta

            u = w * pi
            t = delta - u
            plus = multiply_add(n2, t, delta)
            minus = multiply_add(2.0, pi, -plus)
            plus_real = multiply_add(p2r, plus, plus_real)
            plus_imag = multiply_add(p2i, plus, plus_imag)
            minus_real = multiply_add(q2r, minus, minus_real)
            minus_imag = multiply_add(q2i, minus, minus_imag)
            delta = multiply_add(r2, t, t - u)
            pi = pi + delta

            u = w * pi
            t = delta - u
            plus = multiply_add(n3, t, delta)
            minus = multiply_add(2.0, pi, -plus)
            plus_real = multiply_add(p3r, plus, plus_real)
            plus_imag = multiply_add(p3i, plus, plus_imag)
            minus_real = multiply_add(q3r, minus, minus_real)
            minus_imag = multiply_add(q3i, minus, minus_imag)
            delta = multiply_add(r3, t, t - u)
            pi = pi + delta

            u = w * pi
            t = delta - u
            plus = multiply_add(n4, t, delta)
            minus = multiply_add(2.0, pi, -plus)
            plus_real = multiply_add(p4r, plus, plus_real)
            plus_imag = multiply_add(p4i, plus, plus_imag)
            minus_real = multiply_add(q4r, minus, minus_real)
            minus_imag = multiply_add(q4i, minus, minus_imag)
            delta = multiply_add(r4, t, t - u)
            pi = pi + delta

            state[TILE + lane] = pi
            state[2 * TILE + lane] = delta
            state[7 * TILE + lane] = plus_real
            state[8 * TILE + lane] = plus_imag
            state[9 * TILE + lane] = minus_real
            state[10 * TILE + lane] = minus_imag

        if (first + UNROLL) % BLOCK == 0 or first + UNROLL >= rows.shape[1]:
            for row in range(3, 7):
                for lane in range(lanes):
                    state[row * TILE + lane] += state[(row + 4) * TILE + lane]
                    state[(row + 4) * TILE + lane] = 0.0


@njit(cache=True, nogil=True, error_model="numpy")
def amplitude_sums(
    a: Complexes, b: Complexes, cosine: Reals, first_backward: int, s1: Complexes, s2: Complexes
) -> None:
    """Fill S1, S2 (nθ,) for any coefficients; cosine sorted so that those below 0 start at first_backward."""
    padded = (len(a) + UNROLL - 1) // UNROLL * UNROLL
    rows = np.empty((4, padded))
    state = np.zeros(11 * TILE)
    for half in range(2):
        start = first_backward if half else 0
        stop = len(cosine) if half else first_backward
        if stop > start:
            fold_coefficients(a, b, half == 1, rows)
        for tile in range(start, stop, TILE):
            width = min(TILE, stop - tile)
            for lane in range(width):
                state[lane] = 1.0 - abs(cosine[tile + lane])
            sum_tile(rows, state, min(TILE, (width + 7) // 8 * 8))  # spare lanes run along: no scalar tail
            for lane in range(width):
                plus = complex(state[3 * TILE + lane], state[4 * TILE + lane])
                minus = complex(state[5 * TILE + lane], state[6 * TILE + lane])
                if half:
                    plus, minus = minus, plus
                s1[tile + lane] = 0.5 * (plus + minus)
                s2[tile + lane] = 0.5 * (plus - minus)


@njit(cache=True, nogil=True, error_model="numpy")
def accumulate_sizes(
    m: complex,
    x: Reals,
    terms: NDArray[np.int64],
    weight: Reals,
    cosine: Reals,
    first_backward: int,
    products: Reals,
    totals: Reals,
) -> None:
    """Add a size distribution's share: products (4, nθ) += weight·(|S1|², |S2|², Re S1S2*, Im S1S2*).

    totals (3,) += weight·x²·(Q_ext, Q_sca, g Q_sca). One pass a size, so no amplitude outlives its size.
    """
    s1 = np.empty(len(cosine), dtype=np.complex128)
    s2 = np.empty(len(cosine), dtype=np.complex128)
    for size in range(len(x)):
        a = np.empty(terms[size], dtype=np.complex128)
        b = np.empty(terms[size], dtype=np.complex128)
        mie_coefficients(m, x[size], a, b)
        extinction, scattering, asymmetry, _ = mie_efficiencies(a, b, x[size])
        area = weight[size] * x[size] * x[size]
        totals[0] += area * extinction
        totals[1] += area * scattering
        totals[2] += area * asymmetry
        amplitude_sums(a, b, cosine, first_backward, s1, s2)
        for lane in range(len(cosine)):
            p = s1[lane]
            q = s2[lane]
            products[0, lane] += weight[size] * (p.real * p.real + p.imag * p.imag)
            products[1, lane] += weight[size] * (q.real * q.real + q.imag * q.imag)
            products[2, lane] += weight[size] * (p.real * q.real + p.imag * q.imag)
            products[3, lane] += weight[size] * (p.imag * q.real - p.real * q.imag)
