"""The smallest engine, encoding and solver that keep their contracts: what an outside package can start from.

An outside package names such objects in its entry points, groups ``solverkit.engines``, ``solverkit.encodings`` and
``solverkit.solvers``; a file of the kit offers them as ``ENGINE``, ``ENCODING`` and ``BACK_ENDS``.
"""

from pysat.solvers import Solver

from cycle_encodings._formula import Encoding, Form
from cycle_encodings._gates import Builder
from solverkit.exact.bounds import balanced_bound
from solverkit.methods import Family, Hit, Piece, PieceResult
from solverkit.solvers._contract import Abilities, Kind


def closes(cell, n):
    """Tell whether n is the least element of a cycle of the cell."""
    orbit = cell.map.orbit(n, cell.length)
    between = orbit[1:-1]
    return orbit[-1] == n and all(v > n for v in between) and sum(v & 1 for v in orbit[:-1]) == cell.odd


class EveryNumber:
    """An engine that iterates every number up to the balanced bound."""

    name = "every-number"
    family = Family.ORBIT

    def refusal(self, cell):
        """Refuse what would take longer than a second."""
        return None if cell.length < 10**4 and balanced_bound(cell) * cell.length < 10**6 else "too many numbers"

    def estimate(self, cells):
        """Return seconds."""
        return sum(balanced_bound(cell) * cell.length for cell in cells) * 1e-6

    def batches(self, cells):
        """Return each cell alone."""
        return [(cell,) for cell in cells]

    def pieces(self, batch, seconds):
        """Return the cell as one piece."""
        return [Piece(self.name, batch)]

    def run(self, piece, budget):
        """Try every number."""
        (cell,) = piece.cells
        least = [n for n in range(cell.above + 1, balanced_bound(cell) + 1) if closes(cell, n)]
        return PieceResult(piece, tuple(Hit(cell.length, cell.odd, n) for n in least))


class OneLiteralEach:
    """An encoding with a literal for each least element, found beforehand: good for showing the contract only."""

    name = "one-literal-each"
    form = Form.CNF
    summary = "shows the contract"

    def size(self, cell):
        """Return a rough number of clauses."""
        return balanced_bound(cell)

    def encode(self, cell):
        """Return a formula on the bits of the least element; every other number is excluded by a clause."""
        builder = Builder()
        top = balanced_bound(cell)
        bits = [builder.variable(f"n.{place}") for place in range(max(1, top.bit_length()))]
        builder.group("closing")
        for n in range(1 << len(bits)):
            if not (cell.above < n <= top and closes(cell, n)):
                builder.add(*(-bit if n >> place & 1 else bit for place, bit in enumerate(bits)))
        return Encoding(cell, builder.variables, tuple(builder.clauses), builder.finished(), tuple(bits), builder.names)


class FreshEachTime:
    """A solver that starts anew after each solution."""

    name = "fresh-each-time"
    version = "1"
    kind = Kind.CNF
    abilities = Abilities(incremental=False, proofs=False, assumptions=False)

    def least_elements(self, encoding):
        """Yield the least element of each model."""
        clauses = [list(clause) for clause in encoding.clauses]
        while True:
            with Solver(name="minisat22", bootstrap_with=clauses) as solver:
                if not solver.solve():
                    return
                least = encoding.decode(solver.get_model())
            yield least
            clauses.append(list(encoding.blocking(least)))


ENGINE, ENCODING, BACK_ENDS = EveryNumber(), OneLiteralEach(), (FreshEachTime(),)
