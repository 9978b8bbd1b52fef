"""How many independent draws a weighted, repeated or correlated sample is worth."""

from dataclasses import dataclass
from typing import Any

import numpy as np

from stabcheck.arrays import Array, Flags, Integers, PerDraw

FEWEST_BLOCKS = 20
"""Chains are cut until there are this many pieces: the variance between fewer has too few degrees of freedom."""


@dataclass(frozen=True, slots=True)
class Weighting:
    """Weights of draws and which of them are not independent.

    Parameters
    ----------
    weight : (draw,) array
    cluster : (draw,) array of int
        Draws with one label came from one row of the sample file.
    block : (draw,) array of int
        Draws with one label are correlated with one another: the cluster, or a piece of a chain.
    stand_ins : tuple of (draw,) arrays
        Columns that measure how correlated the draws are where a fate cannot, being the same for all of them.
    """

    weight: PerDraw
    cluster: Integers
    block: Integers
    stand_ins: tuple[Array, ...] = ()

    @classmethod
    def of(
        cls, weight: PerDraw, source_row: Integers, chain: Integers, stand_ins: tuple[Array, ...] = ()
    ) -> "Weighting":
        """Group draws by the row they came from, and by pieces of chains where there are chains."""
        alone = -1 - np.arange(weight.size)
        cluster = _labels(np.where(source_row >= 0, source_row, alone))
        block = _pieces_of_chains(chain, cluster) if (chain >= 0).any() else cluster
        return cls(weight, cluster, block, stand_ins)

    @property
    def is_plain(self) -> bool:
        """Whether the draws have equal weights and are independent."""
        equal = bool((self.weight == self.weight[:1]).all())
        return equal and all(np.unique(label).size == label.size for label in (self.cluster, self.block))

    def take(self, rows: Any) -> "Weighting":
        """Keep some rows."""
        columns = tuple(column[rows] for column in self.stand_ins)
        return Weighting(self.weight[rows], self.cluster[rows], self.block[rows], columns)

    def kish(self) -> float:
        """Effective number: (sum of w)² over the sum of w², rows drawn repeatedly counted as one with their sum.

        References
        ----------
        Kish, L. 1965, Survey Sampling (Wiley).
        """
        per_row = _sums(self.weight, self.cluster)
        squares = float((per_row**2).sum())
        return float(per_row.sum()) ** 2 / squares if squares > 0 else 0.0

    def share(self, hit: Flags) -> float:
        """Weighted share of the draws where ``hit``; NaN without weight."""
        total = float(self.weight.sum())
        return float((self.weight * hit).sum()) / total if total > 0 else float("nan")

    def variance_of_share(self, hit: Flags) -> float:
        """Linearised variance of the ratio of sums, from the scatter between independent groups.

        References
        ----------
        Kish, L. 1965, Survey Sampling (Wiley), ratio means of clusters of unequal size.
        """
        residuals = _sums(self.weight * (hit - self.share(hit)), self.block)
        groups = residuals.size
        if groups < 2:
            return float("inf")
        return groups / (groups - 1) * float((residuals**2).sum()) / float(self.weight.sum()) ** 2


def _labels(values: Integers) -> Integers:
    return np.unique(values, return_inverse=True)[1].astype(np.int64)


def _sums(values: Array, label: Integers) -> Array:
    return np.asarray(np.bincount(_labels(label), weights=values), dtype=np.float64) if values.size else np.zeros(0)


def _pieces_of_chains(chain: Integers, cluster: Integers) -> Integers:
    """Cut each chain into equal runs of source rows: draws of one row stay together, neighbours in the chain too."""
    chains = np.unique(chain)
    pieces = int(np.ceil(FEWEST_BLOCKS / chains.size))
    label = np.zeros(chain.size, dtype=np.int64)
    for index, one in enumerate(chains):
        mine = chain == one
        order = _labels(cluster[mine])  # rank of the row within the chain
        label[mine] = index * pieces + order * pieces // (order.max() + 1)
    return label
