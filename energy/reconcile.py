"""Data reconciliation: measured values that must satisfy linear balances, adjusted by what each is worth.

With measured y, covariance S and balances A y = c, the residuals are r = A y - c with covariance V = A S A' + V_model.
Reconciled values x = y - S A' V^-1 r have covariance S - S A' V^-1 A S; J = r' V^-1 r is held against chi-square. For the
error of one measurement alone, with direction a = column of A: its size b = a' V^-1 r / a' V^-1 a (measured minus true)
and its likelihood ratio T = (a' V^-1 r)^2 / (a' V^-1 a). Source: Narasimhan and Jordache 2000, Data Reconciliation and
Gross Error Detection, chapters 3 and 7 (recalled); VDI 2048 part 1.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from energy.problems import WrongUse


@dataclass(frozen=True)
class Reconciled:
    """n cases of k measurements under m balances.

    value, u : (n, k) reconciled values and their standard uncertainty. residual : (n, m). global_test : (n,) J.
    freedom : number of independent balances. constraint_test : (n, m) |r| in its own standard deviations.
    adjustment_test : (n, k) |x - y| in the standard deviation of the adjustment, 0 where nothing is adjusted.
    ratio, size : (n, k) likelihood ratio T and size b of an error of one measurement alone; ratio 0 and size NaN where
    the measurement is in no balance.
    """

    value: np.ndarray
    u: np.ndarray
    residual: np.ndarray
    global_test: np.ndarray
    freedom: int
    constraint_test: np.ndarray
    adjustment_test: np.ndarray
    ratio: np.ndarray
    size: np.ndarray


def reconcile(
    y: np.ndarray,
    covariance: np.ndarray,
    balances: np.ndarray,
    constant: np.ndarray | float = 0.0,
    model: np.ndarray | None = None,
    residual: np.ndarray | None = None,
) -> Reconciled:
    """Reconcile n cases.

    y : (n, k). covariance : (k, k) or (n, k, k). balances : (m, k) or (n, m, k), rows A with A y = constant. model :
    (m, m) or (n, m, m) covariance of the balances themselves. residual : (n, m) where the balances are not linear and A
    is their slope. Raises WrongUse where balances depend on each other or hold no uncertain measurement.
    """
    y = np.atleast_2d(np.asarray(y, dtype=float))
    n, k = y.shape
    a = np.broadcast_to(np.asarray(balances, dtype=float), (n, *np.asarray(balances).shape[-2:]))
    s = np.broadcast_to(np.asarray(covariance, dtype=float), (n, k, k))
    m = a.shape[1]
    r = np.einsum("nmk,nk->nm", a, y) - constant if residual is None else np.asarray(residual, dtype=float)
    sa = np.einsum("nkl,nml->nkm", s, a)  # S A'
    v = np.einsum("nmk,nkl->nml", a, sa)
    if model is not None:
        v = v + model
    scale = np.sqrt(np.einsum("nmm->nm", v))
    with np.errstate(divide="ignore", invalid="ignore"):
        conditioned = v / scale[:, :, None] / scale[:, None, :]
    if not np.isfinite(conditioned).all() or (np.linalg.cond(conditioned) > 1e12).any():
        raise WrongUse("The balances depend on each other, or one of them holds no uncertain measurement.",
                       "Leave out the balance that follows from the others.")  # fmt: skip
    inverse = np.linalg.inv(conditioned) / scale[:, :, None] / scale[:, None, :]
    weight = np.einsum("nml,nl->nm", inverse, r)  # V^-1 r
    change = np.einsum("nkm,nm->nk", sa, weight)
    taken = np.einsum("nkm,nml,nkl->nk", sa, inverse, sa)  # variance of the adjustment
    drive = np.einsum("nmk,nm->nk", a, weight)
    power = np.einsum("nmk,nml,nlk->nk", a, inverse, a)
    variance = np.einsum("nkk->nk", s)
    with np.errstate(divide="ignore", invalid="ignore"):
        return Reconciled(
            value=y - change,
            u=np.sqrt(np.maximum(variance - taken, 0.0)),
            residual=r,
            global_test=np.einsum("nm,nm->n", r, weight),
            freedom=m,
            constraint_test=np.abs(r) / scale,
            adjustment_test=np.where(taken > 0, np.abs(change) / np.sqrt(taken), 0.0),
            ratio=np.where(power > 0, drive**2 / power, 0.0),
            size=np.where(power > 0, drive / power, np.nan),
        )


def reconcile_independent(
    y: np.ndarray, variance: np.ndarray, balances: np.ndarray, residual: np.ndarray, model: np.ndarray
) -> Reconciled:
    """The same for measurements without covariance under one or two balances, in closed form: for many samples.

    y, variance : (k, n). balances : (m, k, n) slopes. residual, model : (m, n), model the variance of each balance
    itself. Where two balances depend on each other the results are NaN.
    """
    m, k, _ = balances.shape
    first, second = balances[0], balances[-1]
    with np.errstate(divide="ignore", invalid="ignore"):
        v11 = (first**2 * variance).sum(axis=0) + model[0]
        if m == 1:
            weights = [residual[0] / v11]
            quadratic = first**2 / v11
            own = [v11]
        else:
            v12 = (first * second * variance).sum(axis=0)
            v22 = (second**2 * variance).sum(axis=0) + model[1]
            det = v11 * v22 - v12**2
            det = np.where(det > 1e-12 * v11 * v22, det, np.nan)
            weights = [(v22 * residual[0] - v12 * residual[1]) / det, (v11 * residual[1] - v12 * residual[0]) / det]
            quadratic = (first**2 * v22 - 2 * first * second * v12 + second**2 * v11) / det
            own = [v11, v22]
        drive = sum((a * w for a, w in zip(balances, weights, strict=True)), np.zeros((k, 1)))
        change, taken = variance * drive, variance**2 * quadratic
        return Reconciled(
            value=(y - change).T,
            u=np.sqrt(np.maximum(variance - taken, 0.0)).T,
            residual=residual.T,
            global_test=sum(r * w for r, w in zip(residual, weights, strict=True)),
            freedom=m,
            constraint_test=(np.abs(residual) / np.sqrt(own)).T,
            adjustment_test=np.where(taken > 0, np.abs(change) / np.sqrt(taken), 0.0).T,
            ratio=np.where(quadratic > 0, drive**2 / quadratic, 0.0).T,
            size=np.where(quadratic > 0, drive / quadratic, np.nan).T,
        )


def without_unmeasured(balances: np.ndarray, unmeasured: np.ndarray) -> np.ndarray:
    """Balances (m, k) from which the unmeasured inputs ((k,) bool) are eliminated: rows P A_m with P A_u = 0.

    Raises WrongUse where nothing is left to test: every balance holds an unmeasured input of its own.
    """
    a = np.asarray(balances, dtype=float)
    left, size, _ = np.linalg.svd(a[:, unmeasured])
    rank = int((size > 1e-10 * max(1.0, size.max(initial=0.0))).sum())
    rows = left[:, rank:].T @ a
    if not len(rows):
        raise WrongUse("No balance is left once the unmeasured inputs are eliminated.", "Measure one of them.")
    rows[:, unmeasured] = 0.0
    return rows


def solve_unmeasured(balances: np.ndarray, reconciled: np.ndarray, unmeasured: np.ndarray) -> np.ndarray:
    """(n, number unmeasured): the unmeasured inputs that close the balances with the reconciled ones (n, k)."""
    a = np.asarray(balances, dtype=float)
    known = np.where(unmeasured, 0.0, reconciled)
    found: np.ndarray = np.linalg.lstsq(a[:, unmeasured], -(a @ known.T), rcond=None)[0].T
    return found
