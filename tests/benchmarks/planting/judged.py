"""How well an order of candidates puts the planted targets first."""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from planting.web import BoolArray


class Figures(NamedTuple):
    """Of one order: area under the ROC curve; precision among the first k, k the number of targets; the same
    among the first fifty (k where there are fewer); share of planted look-alikes among the first k."""

    auc: float
    precision: float
    first_fifty: float
    lookalikes: float


def judge(order_by: NDArray[np.float64], is_target: BoolArray, is_lookalike: BoolArray) -> Figures:
    """Figures of candidates ordered by falling value; ties by place."""
    order = np.argsort(-order_by, kind="stable")
    hits = is_target[order]
    targets = int(hits.sum())
    # Mann-Whitney: pairs in the right order, ties half.
    values, place = np.unique(order_by, return_inverse=True)
    below = np.cumsum(np.bincount(place[~is_target], minlength=len(values)))
    ties = np.bincount(place[~is_target], minlength=len(values))
    won = below[place[is_target]] - ties[place[is_target]] / 2
    fifty = min(50, targets)
    return Figures(
        auc=float(won.sum() / (targets * (len(hits) - targets))),
        precision=float(hits[:targets].mean()),
        first_fifty=float(hits[:fifty].mean()),
        lookalikes=float(is_lookalike[order][:targets].mean()),
    )
