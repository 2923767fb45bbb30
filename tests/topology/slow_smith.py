"""Smith normal form and homology in the slow, obvious way, with dense lists of Python integers."""


def smith(rows):
    """Invariant factors, each a divisor of the next; as many as the rank. Source: Munkres, 1984, section 11."""
    matrix = [[int(v) for v in row] for row in rows]
    factors = []
    while any(any(row) for row in matrix):
        _, i, j = min((abs(v), i, j) for i, row in enumerate(matrix) for j, v in enumerate(row) if v)
        pivot = matrix[i][j]
        for k, row in enumerate(matrix):
            if k != i:
                times = row[j] // pivot
                matrix[k] = [a - times * b for a, b in zip(row, matrix[i], strict=True)]
        for k in range(len(matrix[0])):
            if k != j:
                times = matrix[i][k] // pivot
                for row in matrix:
                    row[k] -= times * row[j]
        if any(row[j] for k, row in enumerate(matrix) if k != i) or any(v for k, v in enumerate(matrix[i]) if k != j):
            continue
        spoilt = next((row for row in matrix if any(v % pivot for v in row)), None)
        if spoilt is not None:
            matrix[i] = [a + b for a, b in zip(matrix[i], spoilt, strict=True)]
            continue
        factors.append(abs(pivot))
        matrix = [[v for k, v in enumerate(row) if k != j] for k, row in enumerate(matrix) if k != i]
    return factors


def homology(coboundaries, counts):
    """Rank and torsion of each degree, from the dense matrices."""
    factors = [[], *(smith(matrix.toarray().tolist()) for matrix in coboundaries), []]
    return [
        (n - len(factors[k]) - len(factors[k + 1]), tuple(d for d in factors[k + 1] if d > 1))
        for k, n in enumerate(counts)
    ]
