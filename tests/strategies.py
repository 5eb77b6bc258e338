"""What Hypothesis draws: whole networks, by handing its own randomness to the generator."""

from random import Random

from hypothesis import strategies as st

from tests.random_networks import RandomNetwork, draw_network


def randoms() -> st.SearchStrategy[Random]:
    """Return a strategy of randomness that shrinks with everything drawn from it."""
    return st.randoms(use_true_random=False)


def networks(*, sites: int = 4, walks: int = 5) -> st.SearchStrategy[RandomNetwork]:
    """Return a strategy of networks that are feasible by construction, but for what is scarce."""
    return randoms().map(lambda rng: draw_network(rng, sites=sites, walks=walks))
