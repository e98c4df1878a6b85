"""Gaussian copula: named standard normals are mixed so that chosen pairs are correlated."""

from dataclasses import dataclass

import numpy as np


def semidefinite_root(matrix):
    """Lower-triangular root of a positive-semidefinite correlation matrix.

    matrix : symmetric, ones on the diagonal, shape (k, k)
    Returns lower-triangular L with L L^T = matrix, shape (k, k); a correlation of exactly +-1 is allowed.
    Raises ValueError when the matrix is not positive semidefinite.
    """
    size = len(matrix)
    root = np.zeros((size, size))
    for row in range(size):
        for column in range(row):
            rest = matrix[row, column] - root[row, :column] @ root[column, :column]
            root[row, column] = rest / root[column, column] if root[column, column] > 0 else 0.0
        left = 1.0 - root[row, :row] @ root[row, :row]
        if left < -1e-12:
            raise ValueError("the correlations contradict each other: the matrix is not positive semidefinite")
        root[row, row] = np.sqrt(left) if left > 1e-12 else 0.0
    if not np.allclose(root @ root.T, matrix, atol=1e-9):
        raise ValueError("the correlations contradict each other: the matrix is not positive semidefinite")
    return root


@dataclass(frozen=True, kw_only=True, eq=False)
class Copula:
    """Correlated inputs.

    names : the inputs that take part, in a fixed order
    root : their correlation's lower-triangular root, shape (len(names), len(names))
    """

    names: tuple[str, ...] = ()
    root: np.ndarray | None = None

    @classmethod
    def of_pairs(cls, pairs) -> "Copula":
        """Copula of a list of (name, name, correlation); every other pair is uncorrelated.

        Raises ValueError for correlations beyond +-1, a name paired with itself, or a contradiction.
        """
        names = tuple(dict.fromkeys(name for first, second, _ in pairs for name in (first, second)))
        matrix = np.eye(len(names))
        given = [frozenset(pair[:2]) for pair in pairs]
        for first, second, value in pairs:
            if given.count(frozenset((first, second))) > 1:
                raise ValueError(f"correlation between {first} and {second} is given more than once: keep one of them")
            if first == second or not -1 <= value <= 1:
                raise ValueError(f"correlation {value} between {first} and {second}: two names and -1 to 1 are needed")
            row, column = names.index(first), names.index(second)
            matrix[row, column] = matrix[column, row] = value
        return cls(names=names, root=semidefinite_root(matrix) if names else None)

    def _parts(self, name):
        """Weights and names of the independent normals that one correlated input is made of."""
        row = self.root[self.names.index(name)]
        return [(weight, other) for weight, other in zip(row, self.names) if weight]

    def needed(self, names) -> tuple[str, ...]:
        """The independent inputs to draw so that `names` can be mixed."""
        partners = [other for name in names if name in self.names for _, other in self._parts(name)]
        return tuple(dict.fromkeys([*names, *partners]))

    def mix(self, draws, names):
        """Correlated standard normals `names` from independent ones; inputs that are in no pair pass unchanged.

        draws : arrays by name, at least `needed(names)`
        Returns arrays by name, exactly `names`.
        """
        return {name: self._mixed(draws, name) if name in self.names else draws[name] for name in names}

    def _mixed(self, draws, name):
        (weight, first), *others = self._parts(name)
        total = draws[first] if weight == 1 else weight * draws[first]
        for weight, other in others:
            total = total + weight * draws[other]
        return total
