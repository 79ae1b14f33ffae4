"""Scatter-aware whitening of a population → batch → specimen hierarchy, in time linear in specimens.

The log-likelihood of specimen s is close to a quadratic in its own offsets δ_s (modes and local effects) and in what it
shares with others. Together with the Gaussian prior of the offsets, whose precision depends on the scatter sds, that
gives a Gaussian with an arrow-shaped precision. Eliminating specimens, then batches, then the root (block Cholesky,
L Lᵀ = Λ) maps u ~ N(0, I) to

    root g,   batch offsets η_j | g,   specimen offsets δ_s | η, g

The map is exact and smooth for any quadratic, so the sampled density stays exact: the quadratic only decides how round
it looks. Offsets are eliminated in non-centred form (β = Z g + η, v = P β + δ), which keeps digits when an sd is tiny.

Shapes: S specimens, B batches, G root variables, M modes, D the largest number of own variables of a specimen
(its M modes first, then local effects; ``size[s]`` of them are in use).
"""

from __future__ import annotations

import math

import numba as nb
import numpy as np
from numpy.typing import NDArray

from perdure.rheology.maxwell import CompileFlags

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

COMPILE: CompileFlags = {"cache": True, "nogil": True, "error_model": "numpy", "fastmath": {"contract", "reassoc", "nsz"}}


@nb.njit(**COMPILE)
def cholesky(a: Array, lower: Array, n: int) -> bool:
    """Lower factor of the leading n × n block of ``a``; False when it is not positive definite."""
    for i in range(n):
        for j in range(i + 1):
            total = a[i, j]
            for k in range(j):
                total -= lower[i, k] * lower[j, k]
            if i == j:
                if not total > 0.0:
                    return False
                lower[i, i] = math.sqrt(total)
            else:
                lower[i, j] = total / lower[j, j]
    return True


@nb.njit(**COMPILE)
def solve_lower(lower: Array, b: Array, x: Array, n: int) -> None:
    """x with L x = b."""
    for i in range(n):
        total = b[i]
        for k in range(i):
            total -= lower[i, k] * x[k]
        x[i] = total / lower[i, i]


@nb.njit(**COMPILE)
def solve_upper(lower: Array, b: Array, x: Array, n: int) -> None:
    """x with Lᵀ x = b."""
    for i in range(n - 1, -1, -1):
        total = b[i]
        for k in range(i + 1, n):
            total -= lower[k, i] * x[k]
        x[i] = total / lower[i, i]


@nb.njit(**COMPILE)
def cholesky_adjoint(lower: Array, lower_bar: Array, a_bar: Array, n: int, work: Array) -> None:  # noqa: C901 - triangular loops
    """Symmetric cotangent of A = L Lᵀ for a cotangent of L: sym(L⁻ᵀ Φ(Lᵀ L̄) L⁻¹) (Smith 1995; Murray 2016, from memory)."""
    for i in range(n):
        for j in range(i + 1):
            total = 0.0
            for k in range(i, n):
                total += lower[k, i] * lower_bar[k, j]
            work[i, j] = total
        work[i, i] *= 0.5
        for j in range(i + 1, n):
            work[i, j] = 0.0
    for i in range(n - 1, -1, -1):
        for k in range(i + 1, n):
            factor = lower[k, i]
            for j in range(n):
                work[i, j] -= factor * work[k, j]
        for j in range(n):
            work[i, j] /= lower[i, i]
    for i in range(n):
        for j in range(n - 1, -1, -1):
            total = work[i, j]
            for k in range(j + 1, n):
                total -= work[i, k] * lower[k, j]
            work[i, j] = total / lower[j, j]
    for i in range(n):
        for j in range(n):
            a_bar[i, j] = 0.5 * (work[i, j] + work[j, i])


@nb.njit(**COMPILE)
def factor(  # noqa: C901, PLR0912, PLR0913, PLR0915, PLR0917 - a kernel takes flat arrays, in and out; its loops are the algorithm
    own: Array,
    cross: Array,
    linear: Array,
    size: Ints,
    batch: Ints,
    root: Array,
    root_linear: Array,
    loads: Array,
    batch_precision: Array,
    specimen_precision: Array,
    spec_l: Array,
    spec_u: Array,
    spec_y: Array,
    batch_f: Array,
    batch_g: Array,
    batch_c: Array,
    batch_l: Array,
    batch_u: Array,
    batch_y: Array,
    root_l: Array,
    root_y: Array,
) -> float:
    """Eliminate specimens, batches and root; returns Σ ln L_ii, or NaN when a block is not positive definite.

    Inputs: ``own`` (S, D, D), ``cross`` (S, D, G) and ``linear`` (S, D): the quadratic of each specimen;
    ``root`` (G, G), ``root_linear`` (G,): the root's prior and the specimens' own share; ``loads`` (M, G): Z;
    precisions 1/sd² of the modes, (M,). Outputs are the work arrays, filled.
    """
    specimens, width = linear.shape
    batches = batch_l.shape[0]
    modes = batch_precision.size
    g_size = root_linear.size
    log_det = 0.0
    a = np.empty((max(width, modes), max(width, modes)))
    lam = root.copy()
    f_root = root_linear.copy()
    batch_f[:] = 0.0
    batch_g[:] = 0.0
    batch_c[:] = 0.0
    for s in range(specimens):
        d = size[s]
        j = batch[s]
        low = spec_l[s]
        up = spec_u[s]
        for i in range(d):
            for k in range(d):
                a[i, k] = own[s, i, k]
        for m in range(modes):
            a[m, m] += specimen_precision[m]
        if not cholesky(a, low, d):
            return math.nan
        # U = L⁻¹ [own P | cross], one row at a time
        for i in range(d):
            for m in range(modes):
                up[i, m] = own[s, i, m]
            for k in range(g_size):
                up[i, modes + k] = cross[s, i, k]
            y = linear[s, i]
            for k in range(i):
                l_ik = low[i, k]
                y -= l_ik * spec_y[s, k]
                for q in range(modes + g_size):
                    up[i, q] -= l_ik * up[k, q]
            inverse = 1.0 / low[i, i]
            spec_y[s, i] = y * inverse
            for q in range(modes + g_size):
                up[i, q] *= inverse
            log_det += math.log(low[i, i])
        for m in range(modes):
            batch_c[j, m] += linear[s, m]
            for k in range(modes):
                batch_f[j, m, k] += own[s, m, k]
            for k in range(g_size):
                batch_g[j, m, k] += cross[s, m, k]
        for i in range(d):
            y = spec_y[s, i]
            for m in range(modes):
                u_m = up[i, m]
                batch_c[j, m] -= u_m * y
                for k in range(modes):
                    batch_f[j, m, k] -= u_m * up[i, k]
                for k in range(g_size):
                    batch_g[j, m, k] -= u_m * up[i, modes + k]
            for k in range(g_size):
                u_k = up[i, modes + k]
                f_root[k] -= u_k * y
                for q in range(k + 1):
                    lam[k, q] -= u_k * up[i, modes + q]
    for j in range(batches):
        low = batch_l[j]
        up = batch_u[j]
        for m in range(modes):
            for k in range(modes):
                a[m, k] = batch_f[j, m, k]
            a[m, m] += batch_precision[m]
        if not cholesky(a, low, modes):
            return math.nan
        # β = Z g + η: the batch's quadratic in (η, g) is that in (β, g) with the columns of g shifted by F Z
        for m in range(modes):
            for k in range(g_size):
                total = batch_g[j, m, k]
                for q in range(modes):
                    total += batch_f[j, m, q] * loads[q, k]
                up[m, k] = total
        for k in range(g_size):
            for q in range(k + 1):
                total = 0.0
                for m in range(modes):
                    # Zᵀ F Z + Zᵀ F_g + F_gᵀ Z, using Zᵀ (F Z + F_g) = Zᵀ up
                    total += loads[m, k] * up[m, q] + batch_g[j, m, k] * loads[m, q]
                lam[k, q] += total
            for m in range(modes):
                f_root[k] += loads[m, k] * batch_c[j, m]
        for i in range(modes):
            y = batch_c[j, i]
            for k in range(i):
                l_ik = low[i, k]
                y -= l_ik * batch_y[j, k]
                for q in range(g_size):
                    up[i, q] -= l_ik * up[k, q]
            inverse = 1.0 / low[i, i]
            batch_y[j, i] = y * inverse
            for q in range(g_size):
                up[i, q] *= inverse
            log_det += math.log(low[i, i])
        for i in range(modes):
            for k in range(g_size):
                f_root[k] -= up[i, k] * batch_y[j, i]
                for q in range(k + 1):
                    lam[k, q] -= up[i, k] * up[i, q]
    if not cholesky(lam, root_l, g_size):
        return math.nan
    for i in range(g_size):
        log_det += math.log(root_l[i, i])
    solve_lower(root_l, f_root, root_y, g_size)
    return log_det


@nb.njit(**COMPILE)
def place(  # noqa: PLR0913, PLR0917 - a kernel takes flat arrays, in and out
    u: Array,
    size: Ints,
    batch: Ints,
    loads: Array,
    spec_l: Array,
    spec_u: Array,
    spec_y: Array,
    batch_l: Array,
    batch_u: Array,
    batch_y: Array,
    root_l: Array,
    root_y: Array,
    g: Array,
    eta: Array,
    beta: Array,
    delta: Array,
) -> None:
    """u → (g, η, β, δ), walking down the tree. ``u`` holds root, batches, specimens in that order."""
    g_size = g.size
    batches, modes = eta.shape
    specimens, width = delta.shape
    work = np.empty(max(g_size, width))
    for i in range(g_size):
        work[i] = root_y[i] + u[i]
    solve_upper(root_l, work, g, g_size)
    at = g_size
    for j in range(batches):
        for i in range(modes):
            total = batch_y[j, i] + u[at + i]
            for k in range(g_size):
                total -= batch_u[j, i, k] * g[k]
            work[i] = total
        solve_upper(batch_l[j], work, eta[j], modes)
        at += modes
        for m in range(modes):
            total = eta[j, m]
            for k in range(g_size):
                total += loads[m, k] * g[k]
            beta[j, m] = total
    for s in range(specimens):
        d = size[s]
        j = batch[s]
        for i in range(d):
            total = spec_y[s, i] + u[at + i]
            for m in range(modes):
                total -= spec_u[s, i, m] * beta[j, m]
            for k in range(g_size):
                total -= spec_u[s, i, modes + k] * g[k]
            work[i] = total
        solve_upper(spec_l[s], work, delta[s], d)
        at += d


@nb.njit(**COMPILE)
def pull_back(  # noqa: C901, PLR0912, PLR0913, PLR0915, PLR0917 - a kernel takes flat arrays, in and out; its loops are the algorithm
    size: Ints,
    batch: Ints,
    loads: Array,
    own: Array,
    cross: Array,
    linear: Array,
    spec_l: Array,
    spec_u: Array,
    spec_y: Array,
    batch_f: Array,  # noqa: ARG001 - same list of arrays as `factor`
    batch_g: Array,  # noqa: ARG001 - same list of arrays as `factor`
    batch_l: Array,
    batch_u: Array,
    batch_y: Array,
    root_l: Array,
    root_y: Array,
    g: Array,
    eta: Array,
    beta: Array,
    delta: Array,
    g_bar: Array,
    beta_bar: Array,
    eta_bar: Array,
    delta_bar: Array,
    u_bar: Array,
    batch_precision_bar: Array,
    specimen_precision_bar: Array,
    log_scale_bar: Array,
    lam_bar: Array,
    f_root_bar: Array,
) -> None:
    """Reverse of :func:`factor` and :func:`place` for the density  f(g, β, η, δ) − Σ ln L_ii.

    ``g_bar``, ``beta_bar``, ``eta_bar``, ``delta_bar``: derivatives of f with the others held; overwritten.
    Fills ``u_bar``, the derivatives to the precisions, those to the logarithm of a factor on all of a specimen's quadratic
    except the unit prior of its local effects (S,), and the cotangents of the root's quadratic, (G, G) and (G,).
    """
    g_size = g.size
    batches, modes = eta.shape
    specimens, width = delta.shape
    q_size = modes + g_size
    big = max(width, modes, g_size)
    work = np.empty((big, big))
    vector = np.empty(big)
    spec_lbar = np.zeros((specimens, width, width))
    spec_w = np.empty((specimens, width))
    batch_lbar = np.zeros((batches, modes, modes))
    batch_w = np.empty((batches, modes))
    at = g_size + batches * modes
    for s in range(specimens):
        d = size[s]
        j = batch[s]
        w = spec_w[s]
        solve_lower(spec_l[s], delta_bar[s], w, d)
        for i in range(d):
            u_bar[at + i] = w[i]
            for k in range(i + 1):
                spec_lbar[s, i, k] = -delta[s, i] * w[k]
            spec_lbar[s, i, i] -= 1.0 / spec_l[s, i, i]
            for m in range(modes):
                beta_bar[j, m] -= spec_u[s, i, m] * w[i]
            for k in range(g_size):
                g_bar[k] -= spec_u[s, i, modes + k] * w[i]
        at += d
    at = g_size
    for j in range(batches):
        w = batch_w[j]
        for m in range(modes):
            eta_bar[j, m] += beta_bar[j, m]
            for k in range(g_size):
                g_bar[k] += loads[m, k] * beta_bar[j, m]
        solve_lower(batch_l[j], eta_bar[j], w, modes)
        for i in range(modes):
            u_bar[at + i] = w[i]
            for k in range(i + 1):
                batch_lbar[j, i, k] = -eta[j, i] * w[k]
            batch_lbar[j, i, i] -= 1.0 / batch_l[j, i, i]
            for k in range(g_size):
                g_bar[k] -= batch_u[j, i, k] * w[i]
        at += modes
    w_root = np.empty(g_size)
    root_lbar = np.zeros((g_size, g_size))
    solve_lower(root_l, g_bar, w_root, g_size)
    solve_upper(root_l, w_root, f_root_bar, g_size)
    for i in range(g_size):
        u_bar[i] = w_root[i]
        for k in range(i + 1):
            root_lbar[i, k] = -g[i] * w_root[k] - f_root_bar[i] * root_y[k]
        root_lbar[i, i] -= 1.0 / root_l[i, i]
    cholesky_adjoint(root_l, root_lbar, lam_bar, g_size, work)
    # back up the tree: root → batches
    f_bar = np.empty((batches, modes, modes))
    fg_bar = np.empty((batches, modes, g_size))
    c_bar = np.empty((batches, modes))
    up_bar = np.empty((big, q_size))
    y_bar = np.empty(big)
    zl = loads @ lam_bar
    for j in range(batches):
        low = batch_l[j]
        for i in range(modes):
            total = batch_w[j, i]
            for k in range(g_size):
                total -= batch_u[j, i, k] * f_root_bar[k]
            y_bar[i] = total
            for k in range(g_size):
                total = -batch_w[j, i] * g[k] - batch_y[j, i] * f_root_bar[k]
                for q in range(g_size):
                    total -= 2.0 * batch_u[j, i, q] * lam_bar[q, k]
                up_bar[i, k] = total
        # R = Lᵀ⁻¹ Ū is the cotangent of the unsolved right-hand side
        for i in range(modes - 1, -1, -1):
            for k in range(i + 1, modes):
                l_ki = low[k, i]
                y_bar[i] -= l_ki * y_bar[k]
                for q in range(g_size):
                    up_bar[i, q] -= l_ki * up_bar[k, q]
            inverse = 1.0 / low[i, i]
            y_bar[i] *= inverse
            for q in range(g_size):
                up_bar[i, q] *= inverse
        for i in range(modes):
            for k in range(i + 1):
                total = y_bar[i] * batch_y[j, k]
                for q in range(g_size):
                    total += up_bar[i, q] * batch_u[j, k, q]
                batch_lbar[j, i, k] -= total
        cholesky_adjoint(low, batch_lbar[j], f_bar[j], modes, work)
        for m in range(modes):
            batch_precision_bar[m] += f_bar[j, m, m]
        for m in range(modes):
            total = y_bar[m]
            for k in range(g_size):
                total += loads[m, k] * f_root_bar[k]
            c_bar[j, m] = total
            for k in range(g_size):
                # from R = F_g + F Z, and from Zᵀ F_g + F_gᵀ Z in Λ
                fg_bar[j, m, k] = up_bar[m, k] + 2.0 * zl[m, k]
            for q in range(modes):
                total = 0.0
                for k in range(g_size):
                    total += 0.5 * (up_bar[m, k] * loads[q, k] + up_bar[q, k] * loads[m, k]) + zl[m, k] * loads[q, k]
                f_bar[j, m, q] += total
    # batches → specimens
    for s in range(specimens):
        d = size[s]
        j = batch[s]
        low = spec_l[s]
        up = spec_u[s]
        for i in range(d):
            total = spec_w[s, i]
            for m in range(modes):
                total -= up[i, m] * c_bar[j, m]
            for k in range(g_size):
                total -= up[i, modes + k] * f_root_bar[k]
            y_bar[i] = total
            w_i = spec_w[s, i]
            y_i = spec_y[s, i]
            for m in range(modes):
                total = -w_i * beta[j, m] - y_i * c_bar[j, m]
                for q in range(modes):
                    total -= 2.0 * up[i, q] * f_bar[j, q, m]
                for q in range(g_size):
                    total -= up[i, modes + q] * fg_bar[j, m, q]
                up_bar[i, m] = total
            for k in range(g_size):
                vector[k] = -w_i * g[k] - y_i * f_root_bar[k]
            for q in range(g_size):
                factor_q = 2.0 * up[i, modes + q]
                for k in range(g_size):
                    vector[k] -= factor_q * lam_bar[q, k]
            for m in range(modes):
                u_m = up[i, m]
                for k in range(g_size):
                    vector[k] -= u_m * fg_bar[j, m, k]
            for k in range(g_size):
                up_bar[i, modes + k] = vector[k]
        for i in range(d - 1, -1, -1):
            for k in range(i + 1, d):
                l_ki = low[k, i]
                y_bar[i] -= l_ki * y_bar[k]
                for q in range(q_size):
                    up_bar[i, q] -= l_ki * up_bar[k, q]
            inverse = 1.0 / low[i, i]
            y_bar[i] *= inverse
            for q in range(q_size):
                up_bar[i, q] *= inverse
        for i in range(d):
            for k in range(i + 1):
                total = y_bar[i] * spec_y[s, k]
                for q in range(q_size):
                    total += up_bar[i, q] * up[k, q]
                spec_lbar[s, i, k] -= total
        a_bar = np.empty((d, d))
        cholesky_adjoint(low, spec_lbar[s], a_bar, d, work)
        for m in range(modes):
            specimen_precision_bar[m] += a_bar[m, m]
        scale = 0.0
        for i in range(d):
            for k in range(d):
                scale += a_bar[i, k] * own[s, i, k]
            if i >= modes:
                scale -= a_bar[i, i]
            scale += y_bar[i] * linear[s, i]
            for m in range(modes):
                scale += up_bar[i, m] * own[s, i, m]
            for k in range(g_size):
                scale += up_bar[i, modes + k] * cross[s, i, k]
        for m in range(modes):
            scale += c_bar[j, m] * linear[s, m]
            for k in range(modes):
                scale += f_bar[j, m, k] * own[s, m, k]
            for k in range(g_size):
                scale += fg_bar[j, m, k] * cross[s, m, k]
        log_scale_bar[s] = scale
