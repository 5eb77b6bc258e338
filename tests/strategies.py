"""What Hypothesis draws: whole networks, by handing its own randomness to the generator."""

from random import Random

from hypothesis import strategies as st

from tests.random_networks import RandomNetwork, draw_network


def randoms() -> st.SearchStrategy[Random]:
    """Return a strategy of randomness: half of it shrinks with everything that is drawn from it.

    What shrinks is drawn towards simple things; a plain generator with a drawn seed is not, and
    so reaches networks in which everything occurs.
    """
    return st.randoms(use_true_random=False) | st.integers(0, 2**32 - 1).map(Random)


def networks(*, sites: int = 4, walks: int = 5) -> st.SearchStrategy[RandomNetwork]:
    """Return a strategy of networks that are feasible by construction, but for what is scarce."""
    return randoms().map(lambda rng: draw_network(rng, sites=sites, walks=walks))
