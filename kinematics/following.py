"""From the design position to every pose asked for: interpolated starts, path following, lock-up, free curves.

Knows the closure equations, no layout. A pose counts as reached only along a path on which the mechanism
never changes its branch (the sign of the Jacobian's determinant).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from knucklepath.kinematics.closure import ACCEPTED_RESIDUAL, SOUGHT_RESIDUAL, Closure, Corrected
from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.frames import rotation_from_vector, rotation_vector
from knucklepath.kinematics.mechanism import Mechanism
from knucklepath.kinematics.tree import State

Array = NDArray[np.float64]

#: A predicted step is trusted when Newton corrects it by no more than this share of its length …
TRUSTED_SHARE = 0.35
#: … or by no more than this (mm), which covers steps of almost no length.
TRUSTED_MM = 1e-3
#: Path following gives up, and calls the pose the limit, when its step is below this (mm of input).
SMALLEST_STEP = 2e-3
#: Grids of more poses than this start from a polynomial through a coarse grid; smaller ones follow directly.
COARSE_FROM = 120
#: Nodes per input of the coarse grid: enough for starts that one Newton step finishes.
COARSE_NODES = 7
#: Steps of path following, at most; a path needs about five, one that ends at a lock-up about sixty.
MOST_PATH_STEPS = 400
#: A step along a free curve is trusted when it is corrected by no more than this share of its length …
CURVE_SHARE = 0.15
#: … and turns the tangent by no more than 11° (this is the cosine).
CURVE_COSINE = 0.98


@dataclass(frozen=True)
class Solution:
    """Solved poses of a mechanism, poses flattened onto the last axis.

    Attributes
    ----------
    closure : the equations.
    shape : the leading shape of the poses; its product is B.
    inputs : name → (B,) as asked for.
    state : coordinates; where ``reached`` is False, of the last pose on the way there.
    reached : (B,).
    share : (B,) how much of the way from the design position to the pose was reached, 0…1.
    error : (B,) largest joint residual, mm.
    determinant : (B,) of the Jacobian over its value at design: 1 there, towards 0 near a singular position.
    rates : (unknowns, inputs, B).
    """

    closure: Closure
    shape: tuple[int, ...]
    inputs: Mapping[str, Array]
    state: State
    reached: NDArray[np.bool_]
    share: Array
    error: Array
    determinant: Array
    rates: Array


def solve(mechanism: Mechanism, inputs: Mapping[str, ArrayLike]) -> Solution:
    """Solve a mechanism for all given inputs at once.

    Parameters
    ----------
    mechanism : points may carry geometry variants on leading axes.
    inputs : input name → value or array; arrays broadcast against each other and the geometry's leading axes.
        Inputs left out stay at 0.

    Returns
    -------
    Solution; a pose that cannot be reached is marked, never raised.

    Raises
    ------
    MechanismError : an input's name is unknown, or equations and unknowns do not match in number.
    """
    known = [item.name for item in mechanism.inputs]
    for name in inputs:
        if name not in known:
            raise MechanismError(f"there is no input '{name}'; inputs: {', '.join(known) or 'none'}")
    values = {name: np.asarray(inputs.get(name, 0.0), dtype=float) for name in known}
    leading = [point.shape[:-1] for point in mechanism.points.values()]
    shape = np.broadcast_shapes(*leading, *(value.shape for value in values.values()))
    flat = {name: np.ascontiguousarray(np.broadcast_to(value, shape).reshape(-1)) for name, value in values.items()}
    closure = Closure(mechanism, shape)
    if closure.equations != closure.tree.unknowns:
        raise MechanismError(
            f"{closure.tree.unknowns} unknowns stand against {closure.equations} equations; "
            "the mobility audit tells what is free or one too many"
        )
    count = int(np.prod(shape))
    finite = np.all([np.isfinite(value) for value in flat.values()], axis=0) if flat else np.ones(count, bool)
    if count > COARSE_FROM and not mechanism.is_batched and finite.all():
        return _through_coarse(closure, shape, flat)
    return _from_design(closure, shape, flat)


def _from_design(closure: Closure, shape: tuple[int, ...], inputs: Mapping[str, Array]) -> Solution:
    count = int(np.prod(shape))
    start = closure.tree.design(count)
    zero = {name: np.zeros(count) for name in inputs}
    corrected, share = follow(closure, start, zero, inputs)
    return _solution(closure, shape, inputs, corrected, share)


def _solution(
    closure: Closure, shape: tuple[int, ...], inputs: Mapping[str, Array], corrected: Corrected, share: Array
) -> Solution:
    design = closure.correct(closure.tree.design(closure._design_count), {}, 0)
    return Solution(
        closure=closure,
        shape=shape,
        inputs=inputs,
        state=corrected.state,
        reached=np.asarray((share >= 1.0) & corrected.converged),
        share=share,
        error=corrected.error,
        determinant=np.asarray(corrected.determinant / design.determinant),
        rates=corrected.rates,
    )


def _through_coarse(closure: Closure, shape: tuple[int, ...], inputs: Mapping[str, Array]) -> Solution:
    """Follow paths to a coarse grid only; start Newton everywhere else from the polynomial through it."""
    nodes, varying = _chebyshev_nodes(inputs)
    coarse, share = follow(
        closure,
        closure.tree.design(len(next(iter(nodes.values())))),
        {name: np.zeros_like(value) for name, value in nodes.items()},
        nodes,
    )
    if not (share >= 1.0).all():
        return _from_design(closure, shape, inputs)
    state = _interpolate(closure, nodes, varying, coarse.state, inputs)
    corrected = closure.correct(state, inputs)
    sound = corrected.converged & (np.sign(corrected.determinant) == closure.design_sign)
    sound &= corrected.moved < 1.0
    share = np.ones(state.count)
    if not sound.all():
        bad = np.flatnonzero(~sound)
        target = {name: value[bad] for name, value in inputs.items()}
        zero = {name: np.zeros(len(bad)) for name in inputs}
        redone, share_bad = follow(closure, closure.tree.design(len(bad)), zero, target)
        corrected.state.put(bad, redone.state)
        corrected.error[bad], corrected.determinant[bad] = redone.error, redone.determinant
        corrected.rates[..., bad] = redone.rates
        share[bad] = share_bad
    return _solution(closure, shape, inputs, corrected, share)


def _chebyshev_nodes(inputs: Mapping[str, Array]) -> tuple[dict[str, Array], tuple[str, ...]]:
    """A tensor grid of Chebyshev nodes over the inputs' ranges, flattened; and which inputs vary."""
    lines: dict[str, Array] = {}
    angles = np.pi * (np.arange(COARSE_NODES) + 0.5) / COARSE_NODES
    for name, value in inputs.items():
        low, high = float(value.min()), float(value.max())
        if high > low:
            lines[name] = 0.5 * (low + high) + 0.5 * (high - low) * np.cos(angles)
        else:
            lines[name] = np.array([low])
    mesh = np.meshgrid(*lines.values(), indexing="ij")
    nodes = {name: axis.reshape(-1) for name, axis in zip(lines, mesh, strict=True)}
    return nodes, tuple(name for name, line in lines.items() if len(line) > 1)


def _interpolate(
    closure: Closure,
    nodes: Mapping[str, Array],
    varying: tuple[str, ...],
    coarse: State,
    inputs: Mapping[str, Array],
) -> State:
    """Polynomial through the coarse grid's coordinates, evaluated at every pose.

    Evaluated along each distinct value of an input, so a tensor grid costs no more than its lines.
    """
    tree = closure.tree
    vectors = rotation_vector(np.moveaxis(coarse.turns, -1, 1))
    known = np.concatenate(
        (
            np.moveaxis(vectors, -1, 1).reshape(3 * len(coarse.turns), coarse.count),
            coarse.places.reshape(3 * len(coarse.places), coarse.count),
            coarse.scalars,
        )
    )
    columns = []
    fits = []
    for name in varying:
        low, high = float(inputs[name].min()), float(inputs[name].max())
        columns.append(_chebyshev_basis(inputs[name], low, high))
        fits.append(_chebyshev_basis(nodes[name], low, high))
    basis, fit = columns[0], fits[0]
    for column, fitted in zip(columns[1:], fits[1:], strict=True):
        basis = (basis[:, None] * column[None]).reshape(-1, basis.shape[-1])
        fit = (fit[:, None] * fitted[None]).reshape(-1, fit.shape[-1])
    guess = np.linalg.solve(fit.T, known.T).T @ basis
    free = len(coarse.turns)
    turned = guess[: 3 * free].reshape(free, 3, guess.shape[-1])
    turns = np.moveaxis(rotation_from_vector(np.moveaxis(turned, 1, -1)), 1, -1)
    places = guess[3 * free : 6 * free].reshape(free, 3, guess.shape[-1])
    state = State(np.ascontiguousarray(turns), np.ascontiguousarray(places), guess[6 * free :].copy())
    return tree.with_driven(state, inputs) if tree.driven else state


def _chebyshev_basis(value: Array, low: float, high: float) -> Array:
    """Chebyshev polynomials T₀… at ``value`` scaled to −1…1, (COARSE_NODES, count)."""
    x = (2.0 * value - (low + high)) / (high - low)
    basis = np.ones((COARSE_NODES, len(x)))
    basis[1] = x
    for k in range(2, COARSE_NODES):
        basis[k] = 2.0 * x * basis[k - 1] - basis[k - 2]
    return basis


def follow(
    closure: Closure,
    start: State,
    begin: Mapping[str, Array],
    end: Mapping[str, Array],
) -> tuple[Corrected, Array]:
    """Follow the straight line from ``begin`` to ``end`` in the inputs, all poses in step.

    Parameters
    ----------
    start : a solved state at ``begin``.
    begin, end : input name → (B,).

    Returns
    -------
    Corrected at the farthest pose reached on each path, and the share (B,) of the path that this is: 1 where
    the end is reached, less where the mechanism locks or would change its branch.
    """
    count = start.count
    # An input that turns a body is weighted with what it moves, so that every length here is in mm.
    driven = dict(zip(closure.tree.driven, closure.tree.scale[closure.tree.unknowns :], strict=True))
    length = np.maximum.reduce(
        [np.zeros(count), *(driven.get(name, 1.0) * np.abs(end[name] - begin[name]) for name in end)]
    )
    done = closure.correct(start, begin)
    state = done.state.copy()
    error, determinant = done.error.copy(), done.determinant.copy()
    rates, moved = done.rates.copy(), done.moved.copy()
    share, step = np.zeros(count), np.ones(count)
    share[length == 0.0] = 1.0
    usable = np.isfinite(length) & done.converged
    share = np.where(usable, share, 0.0)
    sign = np.broadcast_to(closure.design_sign, (count,))
    for _ in range(MOST_PATH_STEPS):
        active = np.flatnonzero(usable & (share < 1.0))
        if not len(active):
            break
        some = closure.for_poses(active)
        here, ahead = share[active], np.minimum(step[active], 1.0 - share[active])
        change = {name: (end[name] - begin[name])[active] * ahead for name in end}
        target = {name: begin[name][active] + (end[name] - begin[name])[active] * (here + ahead) for name in end}
        tangent = np.zeros((closure.tree.unknowns, len(active)))
        for k, name in enumerate(closure.input_names):
            tangent += rates[:, k, active] * change[name]
        predicted = closure.tree.advance(state.take(active), tangent)
        tried = some.correct(predicted, target, 6)
        # The driven bodies' own motion counts: where the others turn back, their tangent alone is almost nothing.
        stride = np.linalg.norm([closure.size_of(tangent), *(driven[name] * change[name] for name in driven)], axis=0)
        trusted = tried.moved <= TRUSTED_SHARE * stride + TRUSTED_MM
        good = tried.converged & (np.sign(tried.determinant) == sign[active]) & trusted
        index = active[good]
        state.put(index, tried.state.take(good))
        error[index], determinant[index] = tried.error[good], tried.determinant[good]
        rates[..., index], moved[index] = tried.rates[..., good], tried.moved[good]
        share[index] = np.where(here[good] + ahead[good] > 1.0 - 1e-12, 1.0, here[good] + ahead[good])
        step[index] = ahead[good] * 2.0
        poor = active[~good]
        step[poor] = ahead[~good] * 0.4
        usable[poor[step[poor] * length[poor] < SMALLEST_STEP]] = False
    return Corrected(state, error, determinant, rates, moved), share


def trace_curve(
    mechanism: Mechanism, start: State, step: float, most_points: int = 20_000
) -> tuple[State, Array, bool]:
    """Trace the curve of a mechanism with one equation fewer than unknowns, by pseudo-arclength.

    Parameters
    ----------
    mechanism : one degree of freedom, no inputs (or inputs held at 0).
    start : a solved state with one pose.
    step : greatest arclength step, mm (angles weighted with what they move).
    most_points : stop after that many points if the curve has not closed.

    Returns
    -------
    state : the points of the curve, in order.
    arclength : (count,).
    closed : True when the curve came back to its start.

    Raises
    ------
    MechanismError : the equations leave no curve, ``start`` does not close every joint, or the curve meets a
        singular point.

    References
    ----------
    E. L. Allgower and K. Georg, *Numerical Continuation Methods*, 1990 (citation from memory).
    """
    closure = Closure(mechanism)
    unknowns = closure.tree.unknowns
    if closure.equations != unknowns - 1:
        raise MechanismError("a free curve needs exactly one unknown more than equations")
    scale = closure.tree.scale[:unknowns]

    def scaled(state: State) -> tuple[Array, Array]:
        evaluation = closure.evaluate(state, {})
        return evaluation.residual[:, 0], evaluation.jacobian[:, :unknowns, 0] / scale

    def tangent_of(jacobian: Array) -> Array:
        # Along one branch the bordered determinant keeps its sign, so the sign gives the tangent its sense. A step
        # across to a neighbouring branch that runs almost through this one then shows as a reversed tangent.
        along = np.linalg.svd(jacobian)[2][-1]
        return np.asarray(along * np.sign(np.linalg.det(np.vstack((jacobian, along)))))

    residual, jacobian = scaled(start)
    if not np.abs(residual).max(initial=0.0) <= ACCEPTED_RESIDUAL:
        raise MechanismError("a curve starts at a solved pose; at the one given, the joints are open")
    points, lengths = [start], [0.0]
    tangent = tangent_of(jacobian)
    first, closed, size = tangent, False, step
    while len(points) < most_points:
        trial, moved = closure.tree.advance(points[-1], (tangent * size / scale)[:, None]), 0.0
        residual, jacobian = scaled(trial)
        for _ in range(8):
            if np.abs(residual).max(initial=0.0) <= SOUGHT_RESIDUAL:
                break
            change = np.linalg.solve(np.vstack((jacobian, tangent)), np.append(-residual, 0.0))
            moved += float(np.linalg.norm(change))
            trial = closure.tree.advance(trial, (change / scale)[:, None])
            residual, jacobian = scaled(trial)
        new = tangent_of(jacobian)
        # A long correction or a sharp turn may have led to another branch: only a shorter step can tell.
        strayed = moved > CURVE_SHARE * size or new @ tangent < CURVE_COSINE
        if strayed or not np.abs(residual).max(initial=0.0) <= ACCEPTED_RESIDUAL:
            size *= 0.5
            if size < step * 1e-6:
                raise MechanismError("the curve cannot be followed further: it meets a singular point")
            continue
        points.append(trial)
        lengths.append(lengths[-1] + size)
        if len(points) > 3 and _state_distance(closure, trial, start) < 1.01 * size and new @ first > 0.5:
            closed = True
            break
        tangent, size = new, min(size * 1.5, step)
    return stack_states(points), np.array(lengths), closed


def _state_distance(closure: Closure, a: State, b: State) -> float:
    """Distance of two single-pose states, mm: angles weighted with what they move, whole turns left out."""
    total = 0.0
    for link in closure.tree.links.values():
        if link.kind == "free":
            angle = np.linalg.norm(a.turns[link.slot] - b.turns[link.slot]) / np.sqrt(2.0)
            total += float(angle * closure.tree.scale[link.column]) ** 2
            total += float(np.sum((a.places[link.slot] - b.places[link.slot]) ** 2))
        else:
            apart = float(a.scalars[link.slot, 0] - b.scalars[link.slot, 0])
            if link.kind == "hinge":
                apart = 2.0 * np.sin(0.5 * apart) * float(closure.tree.scale[link.column])
            total += apart**2
    return float(np.sqrt(total))


def stack_states(states: list[State]) -> State:
    """Join states along the pose axis."""
    return State(
        np.concatenate([state.turns for state in states], axis=-1),
        np.concatenate([state.places for state in states], axis=-1),
        np.concatenate([state.scalars for state in states], axis=-1),
    )
