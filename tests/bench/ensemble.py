"""Ensembles over many samples: seconds and memory. Samples come, are solved and go in batches."""

from __future__ import annotations

import argparse
import resource
import time
from pathlib import Path

import numpy as np

from pipeline.mixing import ensemble, read_catalogue
from pipeline.mixing.members import keys_of, measurement_noise, perturbed_sources
from pipeline.mixing.properties import respiration_ratios
from pipeline.mixing.solver import solve
from pipeline.mixing.split import quantities_of
from pipeline.mixing.weights import mixing_problem
from pipeline.settings import Settings

FIXTURES = Path(__file__).parents[2] / "fixtures" / "sources.toml"
BATCH = 50_000
SAMPLES_OF_A_CAST = 25
CRUISE = 1_400  # samples
ROUNDS = 9  # of the cruise, of which the best counts


def main(arguments: list[str]) -> None:
    """Measure and print."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench ensemble", description=__doc__)
    parser.add_argument("--samples", type=int, default=1_000_000, help="samples in all")
    parser.add_argument("--members", type=int, default=100, help="members of the ensemble")
    options = parser.parse_args(arguments)
    bench = _Bench(options.members)
    bench.run(10, 0)  # compiles, or loads what was compiled

    ensemble.forget_operators()
    first = bench.run(CRUISE, 0)[1]
    after = min(bench.run(CRUISE, 0)[1] for _ in range(ROUNDS))
    print(f"a cruise of {CRUISE} samples x {options.members} members, 5 sources, 6 properties, respiration")
    print(
        f"first cruise with a catalogue: {1e3 * first:.1f} ms of CPU; operators made: {ensemble.operators_kept()}"
    )
    print(f"next cruise: {1e3 * after:.1f} ms of CPU, best of {ROUNDS}")

    solving = spread = 0.0
    for start in range(0, options.samples, BATCH):
        unperturbed, members = bench.run(min(BATCH, options.samples - start), start)
        solving += unperturbed
        spread += members
    print(f"{options.samples} samples x {options.members} members, one thread")
    print(f"unperturbed solutions: {solving:.2f} s of CPU; members: {spread:.2f} s")
    print(f"seconds per 1e6 samples: {1e6 * (solving + spread) / options.samples:.1f}")
    print(f"peak memory MB: {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:.0f}")


class _Bench:
    """The demonstration's catalogue, and samples of its ocean."""

    def __init__(self, members: int) -> None:
        self.catalogue = read_catalogue(FIXTURES)
        self.chosen = self.catalogue.set[0]
        self.members = members
        self.names = (*self.chosen.properties, *quantities_of(self.catalogue, self.chosen))
        self.problem = mixing_problem(self.catalogue, self.chosen, respiration_ratios(Settings().tracers))

    def run(self, n_sample: int, start: int) -> tuple[float, float]:
        """Return the seconds of CPU for the solutions of samples from ``start`` on, and for their members."""
        random = np.random.default_rng(start)
        problem, n_source = self.problem, len(self.problem.sources)
        n_cast = -(-n_sample // SAMPLES_OF_A_CAST)
        ends = random.dirichlet(np.full(n_source, 0.7), (2, n_cast))
        depth = np.linspace(0, 1, SAMPLES_OF_A_CAST)[:, None]
        shares = ((1 - depth) * ends[0][:, None] + depth * ends[1][:, None]).reshape(-1, n_source)
        values = shares[:n_sample] @ problem.sources
        values += random.uniform(0.0, 0.5, (n_sample, 1)) * problem.processes[0]
        values += random.normal(size=values.shape) * problem.uncertainty / 2

        began = time.process_time()
        solution = solve(problem, values)
        solved = time.process_time()
        sources = perturbed_sources(self.catalogue, self.chosen, self.names, seed=1, members=self.members)
        n_property = len(self.chosen.properties)
        ensemble.run_ensemble(
            problem,
            values,
            solution.support,
            solution.shares.argmax(axis=1),
            measurement_noise(
                keys_of(f"sample {i}" for i in range(start, start + n_sample)), self.chosen.properties, {}
            ),
            sources[:, :, :n_property],
            sources[:, :, n_property:],
        )
        return solved - began, time.process_time() - solved
