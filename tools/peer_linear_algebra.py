#!/usr/bin/env python3
"""Times general-purpose sparse solvers on a matrix written by this project.

    peer_linear_algebra.py MATRIX.mtx [--threads 2] [--repeats 9] [--superlu]
                           [--ours PROGRAM LEVEL]

PARDISO (package `pypardiso`, Intel MKL) factorises the upper triangle as symmetric indefinite;
`--superlu` adds SciPy's SuperLU, which is slow. With `--ours`, PROGRAM is the built example
`solver_ratios` of the sparse crate and LEVEL the refinement of the sphere that MATRIX came from:
it is run alongside and repeats alternate, so that a busy machine is equally unfair to both.
Prints medians in seconds and the ratio ours / PARDISO.
"""

import argparse
import os
import statistics
import subprocess
import time

INDEFINITE = -2
ANALYSE, FACTORISE, SOLVE = 11, 22, 33


def seconds(work):
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


class Pardiso:
    """Phases of PARDISO on the upper triangle of a symmetric matrix."""

    def __init__(self, upper):
        import numpy
        import pypardiso

        self.solver = pypardiso.PyPardisoSolver(mtype=INDEFINITE)
        self.solver.set_iparm(1, 1)  # own parameters
        self.solver.set_iparm(2, 2)  # METIS nested dissection
        self.solver.set_iparm(10, 8)  # pivots perturbed by 1e-8
        self.solver.set_iparm(21, 1)  # Bunch-Kaufman pivoting within supernodes
        self.upper = upper
        self.rhs = numpy.ones((upper.shape[0], 1), order="F")

    def phase(self, number):
        self.solver.set_phase(number)
        return seconds(lambda: self.solver._call_pardiso(self.upper, self.rhs))

    def solve(self):
        self.solver.set_phase(SOLVE)
        return self.solver._call_pardiso(self.upper, self.rhs)


class Ours:
    """The project's solver as a child process that times itself, one repeat per line."""

    def __init__(self, program, level, threads):
        self.process = subprocess.Popen(
            [program, "factorise", level, str(threads)],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            text=True,
        )

    def times(self):
        self.process.stdin.write("\n")
        self.process.stdin.flush()
        return [float(word) for word in self.process.stdout.readline().split()]

    def close(self):
        self.process.stdin.close()
        self.process.wait()


def main():
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("matrix")
    parser.add_argument("--threads", type=int, default=2)
    parser.add_argument("--repeats", type=int, default=9)
    parser.add_argument("--superlu", action="store_true")
    parser.add_argument("--ours", nargs=2, metavar=("PROGRAM", "LEVEL"))
    arguments = parser.parse_args()
    os.environ["MKL_NUM_THREADS"] = str(arguments.threads)

    import numpy
    import scipy.io
    import scipy.sparse

    matrix = scipy.sparse.csr_matrix(scipy.io.mmread(arguments.matrix))
    matrix.sort_indices()
    upper = scipy.sparse.triu(matrix, format="csr")
    upper.sort_indices()

    peer = Pardiso(upper)
    analysis = peer.phase(ANALYSE)
    ours = Ours(*arguments.ours, arguments.threads) if arguments.ours else None
    factor, solve, our_factor, our_solve = [], [], [], []
    for repeat in range(arguments.repeats + 1):
        times = [(factor, peer.phase(FACTORISE)), (solve, peer.phase(SOLVE))]
        if ours:
            times += zip([our_factor, our_solve], ours.times())
        # The first repeat touches fresh memory.
        for samples, value in times if repeat else []:
            samples.append(value)
    x = peer.solve()
    residual = numpy.linalg.norm(matrix @ x - peer.rhs) / numpy.linalg.norm(peer.rhs)
    middle = statistics.median
    print(f"{matrix.shape[0]} unknowns, {arguments.threads} threads")
    print(
        f"PARDISO: analysis {analysis:.4f}, factorisation {middle(factor):.4f}, "
        f"solution {middle(solve):.5f}, residual {residual:.1e}"
    )
    if ours:
        ours.close()
        print(f"ours: factorisation {middle(our_factor):.4f}, solution {middle(our_solve):.5f}")
        print(
            f"ours / PARDISO: factorisation {middle(our_factor) / middle(factor):.2f}, "
            f"solution {middle(our_solve) / middle(solve):.2f}"
        )
    if arguments.superlu:
        from scipy.sparse.linalg import splu

        column = scipy.sparse.csc_matrix(matrix)
        options = {"SymmetricMode": True}
        times = [
            seconds(
                lambda: splu(
                    column, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options=options
                )
            )
            for _ in range(3)
        ]
        print(f"SuperLU: analysis and factorisation {middle(times):.3f}")


if __name__ == "__main__":
    main()
