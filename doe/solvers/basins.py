"""Basins of the order phases: fixed points of a pattern's free phases, and hops between them."""

from concurrent.futures import ThreadPoolExecutor

import numpy as np
from jaxtyping import Complex, Float, Int

from doe import machine
from doe.solvers.search.draws import stream
from doe.solvers.search.fixed_points import EVEN, hop, settle

SAMPLES_PER_ORDER = 8  # coarse samples for each unit of the highest order
FEWEST_SAMPLES = 16
LAST_ROUNDS = 300  # of the best ones on the real grid
HOPS_PER_START = 60


def mirror_images(
    share: Float[np.ndarray, "order_y order_x"],
) -> list[Int[np.ndarray, "image order"]]:
    """For each symmetry the target allows: where each order's mirror images lie.

    The iteration keeps a symmetry of the phases, and mirrored starts leave fewer of them to
    search; starts without any symmetry are always among them.
    """
    index = np.arange(share.size).reshape(share.shape)
    classes = [
        [index],
        [index, index[::-1, ::-1]],
        [index, index[::-1], index[:, ::-1], index[::-1, ::-1]],
    ]
    if share.shape[0] == share.shape[1]:
        classes.append([index, index.T])
        classes.append([index, index.T, index[::-1, ::-1], index[::-1, ::-1].T])
    kept = [c for c in classes if all(np.allclose(share.ravel()[i], share) for i in c)]
    return [np.array([i.ravel() for i in c]) for c in kept]


def coarse(basis: Complex[np.ndarray, "order pixel"]) -> Complex[np.ndarray, "sample order"]:
    """The basis on the smallest grid that samples the orders well, as (sample, order).

    The envelope stays that of the real pixels.
    """
    pixels = basis.shape[1]
    if pixels > 1:
        step = np.angle(basis[:, 1] / basis[:, 0])
        orders = np.rint(-step * pixels / (2 * np.pi))
        samples = max(FEWEST_SAMPLES, int(SAMPLES_PER_ORDER * np.abs(orders).max()))
        if samples < pixels:
            where = (np.arange(samples) + 0.5) / samples
            envelope = np.abs(basis[:, :1]) * pixels / samples
            basis = envelope * np.exp(-2j * np.pi * orders[:, None] * where)
    return columns(basis)


def columns(basis: Complex[np.ndarray, "order pixel"]) -> Complex[np.ndarray, "pixel order"]:
    """A basis in the order in which the compiled loops read it."""
    return np.ascontiguousarray(basis.T.astype(np.complex128))


def settled_orders(
    basis_y: Complex[np.ndarray, "order_y y"],
    basis_x: Complex[np.ndarray, "order_x x"],
    share: Float[np.ndarray, "order_y order_x"],
    *,
    seed: int,
    count: int,
    hops: int,
) -> Complex[np.ndarray, "start order_y order_x"]:
    """Amplitudes (with their weights) of `count` fixed points, the most efficient first.

    hops: kicks in all, shared out among starts; each start draws from its own stream, so that the
    result hangs on the seed alone and not on the threads.
    """
    share = np.ascontiguousarray(share / share.sum())
    small = coarse(basis_y), coarse(basis_x)
    images = mirror_images(share)
    each = HOPS_PER_START if hops else 0
    starts = max(count, round(hops / HOPS_PER_START))
    seeds = [stream(seed, start) for start in range(starts)]

    def one(start: int) -> tuple[Complex[np.ndarray, "order_y order_x"], float]:
        few = each if start * HOPS_PER_START < hops else 0
        orders, score = hop(*small, share, images[start % len(images)], seeds[start], few)
        return orders, score

    with ThreadPoolExecutor(machine.cores()) as pool:
        found = sorted(pool.map(one, range(starts)), key=lambda pair: -pair[1])[:count]
        # The coarse grid ranks basins only roughly: the real one decides.
        full = columns(basis_y), columns(basis_x)
        judged = list(pool.map(lambda pair: settle(*full, share, pair[0], LAST_ROUNDS), found))
    ranked = sorted(range(count), key=lambda i: (judged[i][1] >= EVEN, -judged[i][0]))
    return np.stack([found[i][0] for i in ranked])
