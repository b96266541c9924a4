"""From the design position to every pose asked for: interpolated starts, path following, lock-up, free curves.

Knows the closure equations, no layout. A pose counts as reached only along a path on which the mechanism
never changes its branch (the sign of the Jacobian's determinant).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from knucklepath.kinematics.closure import ACCEPTED_RESIDUAL, SOUGHT_RESIDUAL, Closure, Corrected
from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.frames import rotation_vector
from knucklepath.kinematics.mechanism import Mechanism
from knucklepath.kinematics.tree import State, exponential_first

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
COARSE_NODES = 9
NODE_ANGLES = np.pi * (np.arange(COARSE_NODES) + 0.5) / COARSE_NODES
#: The coarse grid's own residual, mm: Newton squares the error of a start, so that no more is to be gained.
COARSE_RESIDUAL = 5e-5
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
    leading = {point.shape[:-1] for point in mechanism.points.values()}
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
        return _through_coarse(closure, shape, flat, values)
    return _from_design(closure, shape, flat)


def _from_design(closure: Closure, shape: tuple[int, ...], inputs: Mapping[str, Array]) -> Solution:
    count = int(np.prod(shape))
    corrected, share = _follow_from_design(closure, np.arange(count), inputs)
    return _solution(closure, shape, inputs, corrected, share)


def _solution(
    closure: Closure, shape: tuple[int, ...], inputs: Mapping[str, Array], corrected: Corrected, share: Array
) -> Solution:
    return Solution(
        closure=closure,
        shape=shape,
        inputs=inputs,
        state=corrected.state,
        reached=np.asarray((share >= 1.0) & corrected.converged),
        share=share,
        error=corrected.error,
        determinant=np.asarray(corrected.determinant / closure.at_design.determinant),
        rates=corrected.rates,
    )


def _through_coarse(
    closure: Closure, shape: tuple[int, ...], inputs: Mapping[str, Array], values: Mapping[str, Array]
) -> Solution:
    """Follow paths to a coarse grid only; start Newton everywhere else from the polynomial through it.

    ``values`` are the inputs before they were broadcast to ``shape`` and flattened.
    """
    spans = {name: (float(value.min()), float(value.max())) for name, value in inputs.items()}
    mesh = np.meshgrid(*(_chebyshev_nodes(*span) for span in spans.values()), indexing="ij")
    nodes = {name: axis.reshape(-1) for name, axis in zip(spans, mesh, strict=True)}
    coarse, share = _follow_from_design(closure, np.arange(mesh[0].size), nodes, COARSE_RESIDUAL)
    if not (share >= 1.0).all():
        return _from_design(closure, shape, inputs)
    weights = [_node_weights(values[name], *span) for name, span in spans.items()]
    state = _interpolate(coarse.state, mesh[0].shape, shape, weights)
    corrected = closure.correct(state, inputs)
    sound = corrected.converged & (np.sign(corrected.determinant) == np.sign(closure.at_design.determinant))
    sound &= corrected.moved < 1.0
    share = np.ones(state.count)
    if not sound.all():
        bad = np.flatnonzero(~sound)
        redone, share_bad = _follow_from_design(closure, bad, {name: value[bad] for name, value in inputs.items()})
        corrected.state.put(bad, redone.state)
        corrected.error[bad], corrected.determinant[bad] = redone.error, redone.determinant
        corrected.rates[..., bad] = redone.rates
        share[bad] = share_bad
    return _solution(closure, shape, inputs, corrected, share)


def _chebyshev_nodes(low: float, high: float) -> Array:
    """Chebyshev nodes between two values; one node where there is nothing between them."""
    if not high > low:
        return np.array([low])
    return 0.5 * (low + high) + 0.5 * (high - low) * np.cos(NODE_ANGLES)


def _node_weights(value: Array, low: float, high: float) -> Array:
    """How much each Chebyshev node counts in the polynomial's value at ``value`` (...): (nodes, ...).

    From the discrete orthogonality of the Chebyshev polynomials at their nodes: Σₖ (2 − δₖ₀)/n Tₖ(node) Tₖ(value).
    """
    if not high > low:
        return np.ones((1, *value.shape))
    x = ((value - low) - (high - value)) / (high - low)
    basis = np.ones((COARSE_NODES, *x.shape))
    basis[1] = x
    for k in range(2, COARSE_NODES):
        basis[k] = 2.0 * x * basis[k - 1] - basis[k - 2]
    basis[0] *= 0.5
    at_nodes = 2.0 / COARSE_NODES * np.cos(np.outer(NODE_ANGLES, np.arange(COARSE_NODES)))
    return np.asarray(np.einsum("nk,k...->n...", at_nodes, basis))


def _interpolate(coarse: State, nodes: tuple[int, ...], shape: tuple[int, ...], weights: Iterable[Array]) -> State:
    """Polynomial through the coordinates at a tensor grid of ``nodes``, evaluated at poses of ``shape``.

    One input after the other, each along its own axes only: a tensor grid of poses costs little more than its lines.
    """
    free, count = len(coarse.turns), coarse.count
    vectors = np.moveaxis(rotation_vector(np.moveaxis(coarse.turns, -1, 1)), -1, 1)
    known = (vectors.reshape(3 * free, count), coarse.places.reshape(3 * free, count), coarse.scalars)
    guess = np.concatenate(known).reshape(-1, *nodes, *(1 for _ in shape))
    for weight in weights:
        total = guess[:, 0] * weight[0]
        for k in range(1, len(weight)):
            total += guess[:, k] * weight[k]
        guess = total
    guess = np.broadcast_to(guess, (len(guess), *shape)).reshape(len(guess), -1)
    turned, places = guess[: 6 * free].reshape(2, free, 3, guess.shape[-1])
    turns = np.array([exponential_first(vector) for vector in turned]).reshape(free, 3, 3, guess.shape[-1])
    return State(turns, places.copy(), guess[6 * free :].copy())


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
    return _follow(closure, closure.correct(start, begin), begin, end, SOUGHT_RESIDUAL)


def _follow_from_design(
    closure: Closure, poses: NDArray[np.intp], end: Mapping[str, Array], sought: float = SOUGHT_RESIDUAL
) -> tuple[Corrected, Array]:
    """As ``follow``, from the design position; ``poses`` tell the geometry variants where there are any."""
    start = closure.at_design.take(poses if closure.mechanism.is_batched else np.zeros_like(poses))
    return _follow(closure.for_poses(poses), start, {name: np.zeros(len(poses)) for name in end}, end, sought)


@np.errstate(over="ignore", invalid="ignore")  # inputs of 1e200 mm are out of reach, and no more than that
def _follow(
    closure: Closure, done: Corrected, begin: Mapping[str, Array], end: Mapping[str, Array], sought: float
) -> tuple[Corrected, Array]:
    """Follow from ``done``, the poses at ``begin``; closing joints to ``sought`` (mm) on the way."""
    count = done.state.count
    # An input that turns a body is weighted with what it moves, so that every length here is in mm.
    driven = dict(zip(closure.tree.driven, closure.tree.scale[closure.tree.unknowns :], strict=True))
    length = np.maximum.reduce(
        [np.zeros(count), *(driven.get(name, 1.0) * np.abs(end[name] - begin[name]) for name in end)]
    )
    state = done.state.copy()
    error, determinant = done.error.copy(), done.determinant.copy()
    rates, moved = done.rates.copy(), done.moved.copy()
    share, step = np.zeros(count), np.ones(count)
    share[length == 0.0] = 1.0
    usable = np.isfinite(length) & done.converged
    share = np.where(usable, share, 0.0)
    sign = np.broadcast_to(np.sign(closure.at_design.determinant), (count,))
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
        tried = some.correct(predicted, target, 6, sought)
        # The driven bodies' own motion counts: where the others turn back, their tangent alone is almost nothing.
        stride = np.linalg.norm([closure.size_of(tangent), *(driven[name] * change[name] for name in driven)], axis=0)
        trusted = tried.moved <= TRUSTED_SHARE * stride + TRUSTED_MM
        closed = tried.error <= max(sought, ACCEPTED_RESIDUAL)
        good = closed & (np.sign(tried.determinant) == sign[active]) & trusted
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
