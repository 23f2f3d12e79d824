"""Sources of known entropy: what the mixture loses more, against the published redundancy of the tree method.

The bound (`Source.bound`) is for one context-tree weighting with the KT estimator that knows its alphabet. The mixture
also pays for not knowing it (`unseen`: the law of new states), for saying which model is meant, and for the settings
inside a model. Excess is over the loss, on the very log, of who knows the source: its mean is rows x entropy, and
the noise of a drawn log (`luck`, some hundreds of bits) is in both.

Run by hand: python tests/benchmarks/entropy.py
"""

from __future__ import annotations

from logs import Source, by_appearance, chain, tree_source
from processes import table

from seqmix.mixture.mixture import Mixture
from seqmix.models.novelty import Novelty

ROWS = 100_000


def sources() -> dict[str, Source]:
    chains = {f"{states} states, order {k}": chain(states, k, seed=50 + k) for states in (2, 4, 8) for k in range(5)}
    trees = {
        f"{states} states, tree of {leaves} leaves": tree_source(states, depth, leaves, seed=60 + leaves)
        for states, depth, leaves in ((2, 4, 5), (2, 8, 20), (2, 10, 60), (4, 5, 25), (8, 4, 50))
    }
    return chains | trees


def measure() -> None:
    lines = []
    for name, source in sources().items():
        codes, contexts = source.draw(ROWS, seed=70)
        own, mean = source.bits(codes, contexts), ROWS * source.entropy()
        mixture = Mixture()
        rows = by_appearance(codes[source.order :])
        bits = float(mixture.absorb(rows).sum())
        unseen = float(Novelty(0).absorb(rows)[0].sum())
        bound = source.bound(codes, contexts)
        tree = mixture.model_bits[mixture.names.index("tree")] - own
        lines.append([
            name, f"{source.entropy():.4f}", f"{bits / ROWS:.4f}", f"{own - mean:+.0f}", f"{bits - mean:.1f}",
            f"{bits - own:.1f}", f"{tree:.1f}", f"{unseen:.1f}", f"{bound:.1f}",
            "yes" if bits - own <= bound else "NO", "yes" if bits - own - unseen <= bound else "NO",
        ])  # fmt: skip
    table(
        ["source", "entropy", "bits a row", "luck, bits", "bits - rows x entropy", "excess", "of tree alone",
         "unseen", "bound", "under it", "without unseen"],
        lines,
    )  # fmt: skip


if __name__ == "__main__":
    measure()
