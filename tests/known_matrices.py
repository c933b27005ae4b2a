"""Published matrices that several tests speak of."""

import numpy as np

# The two matrices that represent R10: Seymour (1980), Decomposition of regular matroids;
# Schrijver (1986), Theory of Linear and Integer Programming, section 19.4; from memory.
R10 = (
    np.array(
        [
            [1, -1, 0, 0, -1],
            [-1, 1, -1, 0, 0],
            [0, -1, 1, -1, 0],
            [0, 0, -1, 1, -1],
            [-1, 0, 0, -1, 1],
        ]
    ),
    np.array(
        [
            [1, 1, 1, 1, 1],
            [1, 1, 1, 0, 0],
            [1, 0, 1, 1, 0],
            [1, 0, 0, 1, 1],
            [1, 1, 0, 0, 1],
        ]
    ),
)
# R12 with the signs that make it TU (Seymour 1980; Oxley, Matroid Theory, appendix; from memory,
# the signs worked out: up to those of lines they are the only ones, Camion 1963).
R12 = np.array(
    [
        [1, 1, 1, 0, 0, 0],
        [1, 1, 0, 1, 0, 0],
        [1, 0, 0, 0, 1, 0],
        [0, 1, 0, 0, 0, 1],
        [0, 0, 1, 0, -1, -1],
        [0, 0, 0, 1, -1, -1],
    ]
)
# The Fano matroid as [I | A]: the points of the projective plane with two elements.
FANO = np.array([[1, 1, 0, 1], [1, 0, 1, 1], [0, 1, 1, 1]])
