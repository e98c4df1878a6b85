"""The limit state as the estimators of rare events see it: checked and counted."""

import numpy as np


class CountedLimitState:
    """A limit state with a meter on it.

    function : vectorised limit state, standard normals (n, dimension) to values (n,); failure is a value <= 0
    dimension : number of standard normals of a point
    most : calls that may be spent, one a point
    """

    def __init__(self, function, dimension: int, most: int):
        self._function, self.dimension, self._most = function, dimension, most
        self.calls = 0

    @property
    def left(self) -> int:
        """Calls that may still be spent."""
        return self._most - self.calls

    def __call__(self, points):
        """Values at points of shape (n, dimension), shape (n,).

        Raises FloatingPointError when a value is not finite, ValueError when the shape is wrong.
        """
        self.calls += len(points)
        values = np.asarray(self._function(points), dtype=float)
        if values.shape != (len(points),):
            raise ValueError(
                f"a limit state of {len(points)} points returned shape {values.shape}: ({len(points)},) is needed"
            )
        if not np.isfinite(values).all():
            raise FloatingPointError(
                f"the limit state is not finite at {np.flatnonzero(~np.isfinite(values)).size} points"
            )
        return values

    def failed(self, points):
        """Whether points of shape (n, dimension) fail, shape (n,)."""
        return self(points) <= 0
