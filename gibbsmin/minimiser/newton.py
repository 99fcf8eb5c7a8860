"""Guarded Newton iteration on the component potentials, for a batch of points that share their components.

Unknowns of a point: lambda_i = ln y_i of the r components and the total amount N, where y_j is the mole fraction
that species j would have at the present potentials,

    ln y_j = sum_i C_ij lambda_i - Delta_j,     Delta_j = c_j - sum_i C_ij c_i,

and n_j = N y_j. Conditions at the minimum: N C y = m (balances) and sum y = 1.

For a fixed N the balances are the stationarity of the convex function

    phi(lambda) = N sum_j y_j(lambda) - m.lambda,   gradient N C y - m,   Hessian N H,  H = C diag(y) C^T.

*Descent.* Along a direction d every y_j changes by exp(t D_j), D = C^T d. With delta = max(0, max_j D_j) Taylor's
theorem for the exponential bounds phi(lambda + t d) - phi(lambda) <= (-t + (exp(t delta) - 1 - t delta) / delta^2) q for
the Newton direction, where q = d.N H d > 0. The bracket is negative for t = 1 if delta <= 1, and for
t = ln(1 + delta) / delta otherwise: no step needs trial and error to decrease phi. (The same bound underlies damped
Newton methods for generalised self-concordant functions: Sun & Tran-Dinh, Math. Program. 178 (2019) 145.) A
longer step is taken only while the slope phi' along d is still negative, so that phi, being convex, still falls.

*Conditioning.* The components are kept so abundant that C_ij^2 y_j <= EXCHANGE y_i for all j (else j replaces i).
Then H, scaled by its diagonal, has eigenvalues between fixed bounds whatever the size of the traces, and
each row is accurate relative to its own terms: traces of 1e-200 are as exact as the major species.

*Total amount.* N follows from Newton's method on both conditions at once: the new N first, then a guarded step at
that N. This has no proof of its own, so a point that needs more than JOINT_STEPS steps falls back to the nested form,
which has one: minimise phi at fixed N as above, then move ln N by a bracketed Newton step on ln sum y, which
decreases monotonically in ln N with a slope between -1 and 0 (g^T H^-1 g <= sum y by Cauchy-Schwarz).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.minimiser.cholesky import are_few, diagonal_entries, solve_few, solve_packed
from gibbsmin.minimiser.components import LOG_EXCHANGE, Amounts, Components, Floats, Indices
from gibbsmin.minimiser.grouping import alike

STEP_TOLERANCE = 1e-8
"""A step below this (largest change of any ln y) is the last: convergence is quadratic, the error left is its square."""

NESTED_TOLERANCE = 1e-6
"""Inner accuracy in ln y before the nested form moves N."""

EXCHANGE_ALARM = 100.0
"""Looking for such a species costs a pass over all of them; a diagonal above this multiple is the sign to look."""

FREE_STEP = 1.0
"""Full Newton steps are certain to descend up to this growth of ln y; (e^d - 1 - d) / d^2 = 0.72 < 1 there."""

FALLING = -0.9
"""A species whose ln y wants to fall by almost 1 is far too abundant: Newton steps gain one e-fold each, so extend them."""

LONGEST_EXTENSION = 10
"""Doublings of a step at the most."""

TOTAL_CHANGE = 10.0
"""Largest factor by which one step changes N."""

LOG_BOUNDLESS = np.log(1e8)
"""A total that outgrows its estimate by this has no bound: a gas beside phases that may be used up below nothing."""

BATCH = 1024
"""Points iterated side by side: their arrays stay in a core's second-level cache."""

JOINT_STEPS = 60
"""Steps of the joint form before the nested form takes over."""

STEP_LIMIT = 1000

SURE_OF_SIGN = 10.0
"""ln sum y bounds N only if it exceeds this multiple of the change that the balances still ask for."""

EXPONENT_LIMIT = 300.0
"""Beyond this the sums are scaled down to keep them finite."""

DEEP_TRACE = -600.0
"""Components below this ln y would underflow; their rows are then formed relative to the component itself."""

NO_POINTS, NO_CHOICES = np.zeros(0, dtype=np.intp), np.zeros((0, 2), dtype=np.intp)

SLOPE_NOISE = 1e-12
"""A balance closed to this part of its terms could be rounding and is no reason for a longer step."""


@dataclass
class Batch:
    """Points with equal components on their way to the minimum.

    points (n,) the caller's indices; amounts (n, r) m [mol]; log_y (n, r); log_total (n,) ln(N / mol);
    offsets (n, S) Delta; steps (n,) taken so far; bracket (n, 2) bounds of ln N in the nested
    form; ceiling (n,) of ln N, beyond which a point is given up.
    """

    components: Components
    points: Indices
    amounts: Floats
    log_y: Floats
    log_total: Floats
    offsets: Floats
    steps: Indices
    bracket: Floats
    ceiling: Floats

    @classmethod
    def begin(
        cls, components: Components, points: Indices, amounts: Floats, log_y: Floats, total: Floats, c: Floats
    ) -> Batch:
        """A batch at its starting estimate; c (n, S) reduced potentials, total (n,) mol."""
        n = len(points)
        return cls(
            components,
            points,
            amounts,
            log_y,
            np.log(total),
            components.offsets(c),
            np.zeros(n, dtype=np.intp),
            np.tile([-np.inf, np.inf], (n, 1)),
            np.log(total) + LOG_BOUNDLESS,
        )

    def take(self, index: Indices) -> Batch:
        return Batch(
            self.components,
            self.points[index],
            self.amounts[index],
            self.log_y[index],
            self.log_total[index],
            self.offsets[index],
            self.steps[index],
            self.bracket[index],
            self.ceiling[index],
        )

    @classmethod
    def joined(cls, batches: list[Batch]) -> Batch:
        names = ("points", "amounts", "log_y", "log_total", "offsets", "steps", "bracket", "ceiling")
        return cls(
            batches[0].components,
            *(np.concatenate([getattr(batch, name) for batch in batches]) for name in names),
        )

    def log_mole_fractions(self) -> Floats:
        """(n, S) ln y of all species at the present potentials."""
        log_all: Floats = self.log_y @ self.components.C
        log_all -= self.offsets
        return log_all


@dataclass
class Sums:
    """Sums over species at the present potentials, scaled by exp(-shift) of the point."""

    total: Floats  # (n,) sum y
    balance: Floats  # (n, r) C y
    packed: Floats  # (n, r (r + 1) / 2) lower triangle of H, row by row
    shift: Floats  # (n,)

    def take(self, index: Indices) -> Sums:
        return Sums(self.total[index], self.balance[index], self.packed[index], self.shift[index])


def sums_over_species(components: Components, log_all: Floats) -> Sums:
    """The sums that a step needs, from ln y (n, S), which is overwritten."""
    largest = log_all.max(axis=1)
    shift = np.maximum(0.0, largest - EXPONENT_LIMIT)
    if shift.any():
        log_all -= shift[:, None]
    table = np.exp(log_all, out=log_all) @ components.sums
    r = len(components.columns)
    return Sums(table[:, 0], table[:, 1 : 1 + r], table[:, 1 + r :], shift)


def minimise_batches(batches: list[Batch], b: Amounts, c: Floats) -> list[Batch]:
    """Iterate all batches to the minimum.

    Parameters: b (N, r) and c (N, S) of all points, for a change of components. Returns batches of finished points:
    those whose steps reached STEP_LIMIT did not converge.
    """
    finished: list[Batch] = []
    queue = list(batches)
    with np.errstate(
        all="ignore"
    ):  # trial values far off may overflow; what is accepted is judged at the end
        while queue:
            batch = queue.pop()
            if len(batch.points) > BATCH:
                queue.append(batch.take(np.arange(BATCH, len(batch.points))))
                batch = batch.take(np.arange(BATCH))
            while len(batch.points):
                log_all = batch.log_mole_fractions()
                sums = sums_over_species(batch.components, log_all.copy())
                misfits, exchanges = _exchanges(batch, sums, log_all)
                if misfits.size:
                    queue.extend(_exchanged(batch.take(misfits), exchanges, log_all[misfits], b, c))
                    stay = np.setdiff1d(np.arange(len(batch.points)), misfits, assume_unique=True)
                    batch, sums, log_all = batch.take(stay), sums.take(stay), log_all[stay]
                    if not stay.size:
                        break
                done = _step(batch, sums, log_all)
                if done.any():
                    finished.append(batch.take(np.flatnonzero(done)))
                    batch = batch.take(np.flatnonzero(~done))
            queue = _merged(queue)
    return _merged(finished)


def _step(batch: Batch, sums: Sums, log_all: Floats) -> NDArray[np.bool_]:
    """Move every point by one guarded step, in place; tells which are finished."""
    target = batch.amounts * np.exp(-batch.log_total - sums.shift)[:, None]
    to_target, to_balance = _directions(batch, sums, target, log_all)
    ratio = _ratio_of_totals(batch, sums, to_target, to_balance)
    target /= ratio[:, None]
    direction = to_target / ratio[:, None] - to_balance
    reach = np.abs(direction) @ batch.components.largest
    length = np.ones(len(reach))
    if reach.max() > -FALLING:
        far = np.flatnonzero(reach > -FALLING)
        length[far], reach[far] = _long_steps(
            batch.components, log_all[far], sums.shift[far], target[far], direction[far]
        )
    log_ratio = np.log(ratio)
    batch.log_y += length[:, None] * direction
    batch.log_total += log_ratio
    batch.steps += 1
    done: NDArray[np.bool_] = np.maximum(reach, np.abs(log_ratio)) < STEP_TOLERANCE
    done |= (batch.steps >= STEP_LIMIT) | (batch.log_total > batch.ceiling)
    return done


def _directions(batch: Batch, sums: Sums, target: Floats, log_all: Floats) -> tuple[Floats, Floats]:
    """H^-1 (m / N) and H^-1 C y."""
    if batch.log_y.min() - sums.shift.max() >= DEEP_TRACE:
        return _solved(sums.packed, target, sums.balance)
    deep = (batch.log_y - sums.shift[:, None]).min(axis=1) < DEEP_TRACE
    first, second = np.empty_like(target), np.empty_like(target)
    plain = ~deep
    if plain.any():
        first[plain], second[plain] = _solved(sums.packed[plain], target[plain], sums.balance[plain])
    C = batch.components.C
    for point in np.flatnonzero(deep):
        # rows relative to their own component: y itself may be too small for a double
        relative = C * np.exp(
            np.minimum(log_all[point][None, :] - batch.log_y[point][:, None], EXPONENT_LIMIT)
        )
        with np.errstate(divide="ignore"):
            log_target = np.log(np.abs(batch.amounts[point])) - batch.log_total[point] - batch.log_y[point]
        relative_target = np.sign(batch.amounts[point]) * np.exp(np.minimum(log_target, EXPONENT_LIMIT))
        right = np.stack([relative_target, relative.sum(axis=1)], axis=1)
        first[point], second[point] = np.linalg.solve(relative @ C.T, right).T
    return first, second


def _solved(packed: Floats, first: Floats, second: Floats) -> tuple[Floats, Floats]:
    if are_few(*first.shape):
        return solve_few(packed, first, second)
    x, y = solve_packed(*(np.ascontiguousarray(array.T) for array in (packed, first, second)))
    return x.T, y.T


def _ratio_of_totals(batch: Batch, sums: Sums, to_target: Floats, to_balance: Floats) -> Floats:
    """(n,) factor by which N changes in this step."""
    by_target = np.einsum("ni,ni->n", sums.balance, to_target)
    by_balance = np.einsum("ni,ni->n", sums.balance, to_balance)
    ratio: Floats = (by_target - np.exp(-sums.shift) + sums.total) / by_balance
    ratio = np.minimum(np.maximum(ratio, 1.0 / TOTAL_CHANGE), TOTAL_CHANGE)
    nested = batch.steps >= JOINT_STEPS
    if nested.any():
        index = np.flatnonzero(nested)
        ratio[index] = _nested_ratio(
            batch, sums, to_target[index] - to_balance[index], by_balance[index], index
        )
    return ratio


def _nested_ratio(batch: Batch, sums: Sums, direction: Floats, by_balance: Floats, index: Indices) -> Floats:
    """Keep N until the balances hold, then take a bracketed Newton step on ln sum y."""
    ratio = np.ones(len(index))
    reach = np.abs(direction) @ batch.components.largest
    settled = reach < NESTED_TOLERANCE
    at = index[settled]
    excess = np.log(sums.total[at]) + sums.shift[at]
    log_total = batch.log_total[at]
    bracket = batch.bracket[at]
    sure = np.abs(excess) > SURE_OF_SIGN * reach[settled]
    bracket[:, 0] = np.where(sure & (excess > 0.0), np.maximum(bracket[:, 0], log_total), bracket[:, 0])
    bracket[:, 1] = np.where(sure & (excess < 0.0), np.minimum(bracket[:, 1], log_total), bracket[:, 1])
    batch.bracket[at] = bracket
    new = log_total + excess * sums.total[at] / by_balance[settled]
    outside = (new <= bracket[:, 0]) | (new >= bracket[:, 1])
    new = np.where(outside & np.isfinite(bracket).all(axis=1), bracket.mean(axis=1), new)
    ratio[settled] = np.exp(np.clip(new - log_total, -np.log(TOTAL_CHANGE), np.log(TOTAL_CHANGE)))
    return ratio


def _long_steps(
    components: Components, log_all: Floats, shift: Floats, target: Floats, direction: Floats
) -> tuple[Floats, Floats]:
    """Step lengths (n,) of points that are still far off, and the largest change of any ln y they bring."""
    change = direction @ components.C
    rise = np.maximum(change.max(axis=1), 0.0)
    length = np.where(rise > FREE_STEP, np.log1p(rise) / np.maximum(rise, FREE_STEP), 1.0)
    falling = np.flatnonzero((change.min(axis=1) < FALLING) | (rise > FREE_STEP))
    for _ in range(LONGEST_EXTENSION):
        if not falling.size:
            break
        tried = 2.0 * length[falling]
        exponents = log_all[falling] - shift[falling, None] + tried[:, None] * change[falling]
        tame = exponents.max(axis=1) < EXPONENT_LIMIT + 1.0
        y = np.exp(np.where(tame[:, None], exponents, 0.0))
        residual = y @ components.C.T - target[falling]
        size = y @ np.abs(components.C).T + np.abs(target[falling])
        # a row that is balanced to rounding has nothing to say, however large its terms beside those of a trace
        residual[np.abs(residual) < SLOPE_NOISE * size] = 0.0
        still_falling = tame & ((direction[falling] * residual).sum(axis=1) < 0.0)
        length[falling[still_falling]] *= 2.0
        falling = falling[still_falling]
    return length, np.abs(change).max(axis=1) * length


def _exchanges(batch: Batch, sums: Sums, log_all: Floats) -> tuple[Indices, Indices]:
    """Positions of points whose components should change, and for each (position of component, species)."""
    r = len(batch.components.columns)
    log_own = batch.log_y - sums.shift[:, None]
    alarm = sums.packed[:, diagonal_entries(r)] > EXCHANGE_ALARM * np.exp(log_own)
    alarm |= log_own < DEEP_TRACE
    if not alarm.any():
        return NO_POINTS, NO_CHOICES
    index = np.flatnonzero(alarm.any(axis=1))
    log_squares = batch.components.log_squares
    best = np.full(len(index), LOG_EXCHANGE)
    choice = np.full((len(index), 2), -1, dtype=np.intp)
    for i in range(r):
        gain = log_all[index] + log_squares[i] - batch.log_y[index, i][:, None]
        species = np.argmax(gain, axis=1)
        value = gain[np.arange(len(index)), species]
        better = value > best
        best[better] = value[better]
        choice[better, 0] = i
        choice[better, 1] = species[better]
    found = choice[:, 0] >= 0
    return index[found], choice[found]


def _exchanged(batch: Batch, choices: Indices, log_all: Floats, b: Amounts, c: Floats) -> Iterator[Batch]:
    for (position, species), index in alike(choices, np.arange(len(choices))):
        components = batch.components.exchange(int(position), int(species))
        part = batch.take(index)
        yield Batch(
            components,
            part.points,
            components.amounts(b[part.points]),
            log_all[np.ix_(index, components.columns)],
            part.log_total,
            components.offsets(c[part.points]),
            part.steps,
            part.bracket,
            part.ceiling,
        )


def _merged(batches: list[Batch]) -> list[Batch]:
    """Join batches that have come to the same components."""
    alike: dict[tuple[int, ...], list[Batch]] = {}
    for batch in batches:
        alike.setdefault(batch.components.key, []).append(batch)
    return [group[0] if len(group) == 1 else Batch.joined(group) for group in alike.values()]
