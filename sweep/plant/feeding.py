"""Feeds whose rate events change: how much of each is in at any time, when it ends, and how much of it comes in at all.

N points, F feeds, E stretches between the events.
"""

from dataclasses import replace

import numpy as np

from sweep.plant.charge import Brought, Pieces
from sweep.plant.happenings import Happenings, sets_any, settings_at
from sweep.plant.values import Floats, Values
from sweep.study.model import LATEST, Study


def feed_as_it_went(study: Study, values: Values, brought: Brought, happened: Happenings) -> Brought:
    """Return what is brought in with the feeds slowed, stopped or sped up by events; as written where no event does.

    A feed delivers its rate as written, times the factor that holds, from its start until the whole of it is in.
    """
    if not sets_any(study, "recipe.feeds.", ".rate_factor"):
        return brought
    columns = [h for h, k in enumerate(happened.columns) if any(path.endswith(".rate_factor") for path in study.events[k].sets)]
    times = np.minimum(np.sort(happened.when[:, columns], axis=1), LATEST)
    edges = np.column_stack([np.zeros(values.count), times, np.full(values.count, 2.0 * LATEST)])
    stretches = edges.shape[1] - 1
    factor = np.zeros((values.count, len(study.feeds), stretches))
    for e in range(stretches):
        here, _ = settings_at(study, values, happened, edges[:, e])
        for f, feed in enumerate(study.feeds):
            factor[:, f, e] = here.get(f"recipe.feeds.{feed.name}.rate_factor", 1.0)
    pieces, whole = _pieces(brought, edges, factor)
    flows = pieces.rate > 0.0
    start = np.where(flows.any(axis=2), np.where(flows, pieces.begin, np.inf).min(axis=2), 0.0)
    end = np.where(flows, pieces.finish, 0.0).max(axis=2)
    scale = np.where(whole > 0.0, whole, 1.0)
    pieces = Pieces(pieces.begin, pieces.finish, pieces.rate / scale[:, :, None])
    return replace(
        brought, fed=brought.fed * whole[:, :, None], feed_volume=brought.feed_volume * whole, start=start, end=end, pieces=pieces
    )  # fmt: skip


def _pieces(brought: Brought, edges: Floats, factor: Floats) -> tuple[Pieces, Floats]:
    """Return the stretches in which each feed flows, with its rate (shares of the written feed per second), and the share (N, F) it reaches."""
    duration, share = brought.end - brought.start, np.zeros(brought.start.shape)
    begins, finishes, rates = [], [], []
    for e in range(factor.shape[2]):
        rate = factor[:, :, e] / duration
        begin = np.maximum(edges[:, None, e], brought.start)
        stop = np.maximum(edges[:, None, e + 1], begin)
        left = 1.0 - share
        full = begin + np.where(rate > 0.0, left / np.where(rate > 0.0, rate, 1.0), np.inf)
        done = full <= stop
        finish = np.where(done, full, stop)
        flows = (rate > 0.0) & (left > 0.0) & (finish > begin)
        share = np.where(flows, np.where(done, 1.0, share + rate * (finish - begin)), share)
        begins.append(begin)
        finishes.append(np.where(flows, finish, begin))
        rates.append(np.where(flows, rate, 0.0))
    return Pieces(np.stack(begins, axis=2), np.stack(finishes, axis=2), np.stack(rates, axis=2)), share
