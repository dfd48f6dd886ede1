"""Reference values for least squares, eigen-free determinants and ranks, by mpmath with 50 digits.

Usage: python3 linear-algebra.py > linear-algebra.json
"""

import json
import random
import sys

import mpmath
from mpmath import mp, mpf

mp.dps = 50
random.seed(11)


def numbers(matrix):
    return [[float(matrix[i, j]) for j in range(matrix.cols)] for i in range(matrix.rows)]


def least_squares():
    rows, columns = 12, 4
    x = mp.matrix([[mpf(random.randint(-9, 9)) for _ in range(columns)] for _ in range(rows)])
    y = mp.matrix([[mpf(random.randint(-50, 50)) / 8] for _ in range(rows)])
    inverse = (x.T * x) ** -1
    beta = inverse * (x.T * y)
    residual = y - x * beta
    weights = mp.matrix([[1], [-1], [2], [mpf(1) / 2]])
    return {
        "x": numbers(x),
        "y": [row[0] for row in numbers(y)],
        "coefficients": [mpmath.nstr(value, 20) for value in beta],
        "residualSumOfSquares": mpmath.nstr((residual.T * residual)[0], 20),
        "weights": [1, -1, 2, 0.5],
        "varianceFactor": mpmath.nstr((weights.T * inverse * weights)[0], 20),
    }


def determinant():
    a = mp.matrix([[mpf(random.randint(-9, 9)) for _ in range(6)] for _ in range(9)])
    positive = a.T * a
    return {"matrix": numbers(positive), "logDeterminant": mpmath.nstr(mp.log(mp.det(positive)), 20)}


json.dump(
    {
        "generator": "linear-algebra.py",
        "versions": {"python": sys.version.split()[0], "mpmath": mpmath.__version__},
        "leastSquares": least_squares(),
        "determinant": determinant(),
    },
    sys.stdout,
    indent=1,
)
