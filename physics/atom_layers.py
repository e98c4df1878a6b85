"""The layered operator of a device and its inverse, and conjugate gradients that it preconditions.

Averaged over the plane, a device is a stack of layers. Cosine transforms along the width and the length part the stack
into independent columns, each with three diagonals, and those are eliminated for all columns at once.
"""

import numpy as np
from scipy.fft import dctn, idctn


def plane_eigenvalues(boxes):
    """Eigenvalues of the second difference between mirrors, as the cosine transform orders them.

    boxes : along the direction [1]
    Returns array [1], from 0 to nearly 4.
    Source: 2 - 2 cos(pi k/n), elementary; G. Strang, SIAM Review 41, 135 (1999).
    """
    return 2 - 2 * np.cos(np.pi * np.arange(boxes) / boxes)


class LayeredOperator:
    """Inverse of the stack of layers.

    depth_links : conductance of a box's column between lines [m], one more than free lines
    width_links, length_links : conductance of a box's row between neighbours in the plane [m], one per free line
    plane : boxes along the width and along the length [1]
    """

    def __init__(self, depth_links, width_links, length_links, plane):
        modes = width_links[:, None, None] * plane_eigenvalues(plane[0])[:, None]
        modes = modes + length_links[:, None, None] * plane_eigenvalues(plane[1])
        self._diagonal = modes + (depth_links[:-1] + depth_links[1:])[:, None, None]
        self._links = depth_links[1:-1]
        self._pivot = np.empty_like(self._diagonal)
        self._factor = np.empty_like(self._diagonal[1:])
        self._scratch = np.empty_like(self._diagonal[0])

    def screened(self, screening):
        """Prepare the inverse for layers that also screen.

        screening : what carriers on each free line add to the diagonal [m]
        Returns a LayeredOperator: this one.
        Source: elimination of three diagonals, elementary.
        """
        pivot, factor, links = self._pivot, self._factor, self._links
        np.add(self._diagonal, screening[:, None, None], out=pivot)
        for line in range(1, pivot.shape[0]):
            np.divide(links[line - 1], pivot[line - 1], out=factor[line - 1])
            np.multiply(factor[line - 1], links[line - 1], out=self._scratch)
            pivot[line] -= self._scratch
        np.reciprocal(pivot, out=pivot)
        return self

    def solved(self, right):
        """Solve the layered equations.

        right : right-hand side, array (free lines, along the width, along the length) [1]
        Returns solution [1], the same shape, over the operator's [m].
        Source: cosine transform of the second kind; elimination and back substitution in depth.
        """
        modes = dctn(right, type=2, axes=(1, 2), norm="ortho", workers=1)
        scratch, factor = self._scratch, self._factor
        for line in range(1, modes.shape[0]):
            np.multiply(factor[line - 1], modes[line - 1], out=scratch)
            modes[line] += scratch
        modes *= self._pivot
        for line in range(modes.shape[0] - 2, -1, -1):
            np.multiply(factor[line], modes[line + 1], out=scratch)
            modes[line] += scratch
        return idctn(modes, type=2, axes=(1, 2), norm="ortho", workers=1, overwrite_x=True)


def product(one, other):
    """Sum of the products of two arrays, in an order that depends on no thread.

    one, other : arrays of one shape, any unit [1]
    Returns sum [1].
    Source: definition.
    """
    return float(np.einsum("i,i->", one.ravel(), other.ravel()))


def conjugate_gradients(applied, inverse, right, tolerance, most=400):
    """Solve symmetric, positive definite equations.

    applied : function of an array, the matrix's product with it
    inverse : function of an array, an approximate solution that is symmetric and positive definite too
    right : right-hand side, any shape [1]
    tolerance : of the residual, in the norm of the inverse, over its first [1]
    most : iterations after which it stops with what it has [1]
    Returns solution [1] and the number of iterations [1].
    Source: M. R. Hestenes and E. Stiefel, J. Res. Natl. Bur. Stand. 49, 409 (1952); preconditioned.
    """
    solution, residual = np.zeros_like(right), right.copy()
    direction = inverse(residual)
    size = product(residual, direction)
    goal = tolerance**2 * size
    for iteration in range(1, most + 1):
        if size <= goal or size == 0:
            return solution, iteration - 1
        image = applied(direction)
        step = size / product(direction, image)
        solution += step * direction
        image *= step
        residual -= image
        nearer = inverse(residual)
        size, last = product(residual, nearer), size
        direction *= size / last
        direction += nearer
    return solution, most
