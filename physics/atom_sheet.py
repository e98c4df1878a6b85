"""Current through an inversion sheet that is not the same everywhere: a network of resistors between source and drain."""

import numpy as np
from scipy.sparse import csc_array
from scipy.sparse.linalg import splu


class SheetNetwork:
    """Network over the boxes of a sheet; current flows along the second direction, the sides are mirrors.

    across, along : boxes along the width and along the length [1]
    aspect : width of a box over its length [1]
    """

    def __init__(self, across, along, aspect):
        self._shape, self._aspect = (across, along), aspect
        number = np.arange(across * along).reshape(across, along)
        pairs = [(number[:, :-1], number[:, 1:]), (number[:-1], number[1:])]
        self._first, self._second = (np.concatenate([pair[side].ravel() for pair in pairs]) for side in (0, 1))
        size = number.size
        self._rows = np.concatenate([self._first, self._second, np.arange(size)])
        self._columns = np.concatenate([self._second, self._first, np.arange(size)])

    def current(self, sheet):
        """Current under one unit of voltage between source and drain.

        sheet : conductance of each box's square, array (across, along), any unit [1]
        Returns current, in that unit [1].
        Range: sheet > 0; low drain voltage, where conductance does not depend on it.
        Source: Kirchhoff's laws. Between neighbours the conductance is their geometric mean, so that a sheet and its
        reciprocal turned by a right angle are dual, within 2 % for neighbours that differ by less than a factor e: J. B.
        Keller, J. Math. Phys. 5, 548 (1964); A. M. Dykhne, Sov. Phys. JETP 32, 63 (1971).
        """
        scale = sheet.mean()
        root, aspect = np.sqrt(sheet / scale), self._aspect
        links = [(root[:, 1:] * root[:, :-1] * aspect).ravel(), (root[1:] * root[:-1] / aspect).ravel()]
        links = np.concatenate(links)
        source, drain = np.zeros(self._shape), np.zeros(self._shape)
        source[:, 0], drain[:, -1] = 2 * aspect * root[:, 0] ** 2, 2 * aspect * root[:, -1] ** 2
        size = root.size
        diagonal = np.bincount(self._first, links, size) + np.bincount(self._second, links, size)
        diagonal = diagonal + (source + drain).ravel()
        values = np.concatenate([-links, -links, diagonal])
        matrix = csc_array((values, (self._rows, self._columns)), shape=(size, size))
        factor = splu(matrix, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options={"SymmetricMode": True})
        voltage = factor.solve(drain.ravel()).reshape(self._shape)
        return float(scale * (source * voltage).sum())
