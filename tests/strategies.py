"""Hypothesis strategies for maps, words and cells."""

from hypothesis import strategies as st

from solverkit.maps import Map
from solverkit.window import Cell

multipliers = st.integers(1, 7).map(lambda i: 2 * i + 1)
offsets = st.integers(-300, 300).map(lambda i: 2 * i + 1)
maps = st.builds(Map, multipliers, offsets)
words = st.text("01", min_size=1, max_size=24)


@st.composite
def cells(draw, longest=12, divisors=True):
    """Cells of positive elements with sign(D) = sign(d); half of the offsets share a factor with D."""
    q = draw(multipliers)
    k = draw(st.integers(1, longest))
    x = draw(st.integers(1, k))
    determinant = 2**k - q**x
    size = draw(st.integers(0, 200).map(lambda i: 2 * i + 1))
    if divisors and draw(st.booleans()):
        shared = [f for f in range(1, 60, 2) if determinant % f == 0]
        size = abs(determinant) // draw(st.sampled_from(shared)) * draw(st.sampled_from([1, 1, 3, 5]))
    above = draw(st.sampled_from([0, 0, 0, 1, 7, 40]))
    return Cell(q, size if determinant > 0 else -size, k, x, above)
