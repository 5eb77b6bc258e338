"""What Hypothesis draws: whole networks, by handing its own randomness to the generator."""

from random import Random

import orjson
from hypothesis import note
from hypothesis import strategies as st

from tests.random_networks import RandomNetwork, draw_network
from tests.random_sharing import draw_sharing


def randoms() -> st.SearchStrategy[Random]:
    """Return a strategy of randomness: half of it shrinks with everything that is drawn from it.

    What shrinks is drawn towards simple things; a plain generator with a drawn seed is not, and
    so reaches networks in which everything occurs.
    """
    return st.randoms(use_true_random=False) | st.integers(0, 2**32 - 1).map(Random)


@st.composite
def networks(draw: st.DrawFn, *, sites: int = 4, walks: int = 5) -> RandomNetwork:
    """Draw a network that is feasible by construction, but for what is scarce on purpose."""
    network = draw_network(draw(randoms()), sites=sites, walks=walks)
    # Shown for the example that fails, as it would be sent.
    note(f"{network.options} {orjson.dumps(network.document).decode()}")
    return network


@st.composite
def sharing_networks(draw: st.DrawFn) -> RandomNetwork:
    """Draw a network whose items share limits that often bind, or leave no plan at all."""
    network = draw_sharing(draw(randoms()))
    note(f"{network.options} {orjson.dumps(network.document).decode()}")
    return network
