"""One batch: a pure function of a run and a number."""

from __future__ import annotations

import threading
from collections.abc import Callable
from functools import lru_cache, partial
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import linalg  # noqa: F401  loads the linear algebra that limit_blas_threads limits
from threadpoolctl import threadpool_limits

from pairmc.errors import PairmcError
from pairmc.physics.observables import registry
from pairmc.physics.sampling.direct import DirectSampler
from pairmc.physics.snapshots import Snapshots, joined
from pairmc.physics.system import System
from pairmc.physics.theory import energy, singlet_fraction
from pairmc.runfile.digest import digest
from pairmc.runfile.run import RunFile
from pairmc.streams import generator

# About this many coordinates are drawn before they are tallied: it bounds the memory, and the time
# after which a request to stop is heard.
_COORDINATES_AT_A_TIME = 60_000

Arrays = dict[str, NDArray[Any]]

# Held while expectations are prepared, so that workers do not all do the same.
_ONE_AT_A_TIME = threading.Lock()


class StoppedError(PairmcError):
    """A batch was asked to stop before it was finished."""


@lru_cache(maxsize=1)
def limit_blas_threads() -> None:
    """Give the linear algebra one thread, for the whole process and for good.

    Several batches run side by side; several threads each would slow them down four times and more.
    """
    threadpool_limits(1)


def make_sampler(run: RunFile, batch: int, purpose: str = "sample") -> DirectSampler:
    """Return the sampler of a batch at its first snapshot.

    Parameters
    ----------
    run
        The run.
    batch
        Batch number, from 0.
    purpose
        See `pairmc.streams`.
    """
    limit_blas_threads()
    streams = partial(generator, run.seed, purpose, digest(run), batch)
    return DirectSampler(run.system(), streams)


def kept_in_batch(run: RunFile, batch: int) -> int:
    """Return how many snapshots of a batch are stored: those with global index below the limit."""
    if run.keep_snapshots is None:
        return run.batch_size
    return int(np.clip(run.keep_snapshots - batch * run.batch_size, 0, run.batch_size))


def snapshots_at_a_time(run: RunFile) -> int:
    """Return how many snapshots are drawn before they are tallied."""
    return max(1, _COORDINATES_AT_A_TIME // (run.gas.particles * run.gas.dimension))


@lru_cache(maxsize=4)
def _expectations_known(run: RunFile) -> bool:
    """Work out what the expectations of all twists need, once for all batches of a run."""
    system = run.system()
    twist = np.zeros((1, run.gas.dimension))
    for name, settings in run.observables.items():
        grid = registry.observable(name).grid(settings, system)
        registry.theory(name).at_twists(system, grid, twist)
    energy.at_twists(system, twist)
    return True


def run_batch(run: RunFile, batch: int, stop: Callable[[], bool] = lambda: False) -> Arrays:
    """Draw and tally one batch.

    Parameters
    ----------
    run
        The run.
    batch
        Batch number, from 0.
    stop
        Asked now and then; true ends the batch at once.

    Returns
    -------
    dict of arrays
        ``OBSERVABLE.TALLY`` for every tally, ``population_sum`` (component) the particles of all
        snapshots together, ``kept.position`` (snapshot, particle, axis) as
        fractions of the sides, float32 in [0, 1), and ``kept.component`` (snapshot, particle).
        Where every snapshot has a twist of its own also ``kept.twist`` (snapshot, axis) and
        ``energy_ratio`` (component), the exact kinetic energy at the twists of all snapshots as a
        multiple of the infinite system's, their mean; of two components also ``singlet_pairs``
        (separation), the expected number of pairs in the spin singlet.

    Raises
    ------
    StoppedError
        Where `stop` said so.
    """
    system = run.system()
    sampler = make_sampler(run, batch)
    modules = {name: registry.observable(name) for name in run.observables}
    grids = {name: modules[name].grid(run.observables[name], system) for name in modules}
    averaged = bool(system.averaged)
    if averaged:
        with _ONE_AT_A_TIME:
            _expectations_known(run)
    tallies = {name: modules[name].empty(grids[name], averaged) for name in modules}
    populations = np.zeros(len(run.gas.components), dtype=np.int64)
    energies = np.zeros(len(run.gas.components))
    separations, two = grids["pair_correlation"], len(run.gas.components) == 2
    singlets = np.zeros(separations.bins)
    keep = kept_in_batch(run, batch)
    kept: list[Snapshots] = []
    done = 0
    while done < run.batch_size:
        if stop():
            raise StoppedError(f"batch {batch} stopped")
        count = min(snapshots_at_a_time(run), run.batch_size - done)
        snapshots = sampler.draw(count)
        for name, module in modules.items():
            expected = None
            if averaged:
                theory = registry.theory(name)
                expected = theory.at_twists(system, grids[name], snapshots.twist)
            module.tally(snapshots, grids[name], tallies[name], expected)
        if averaged:
            energies += energy.at_twists(system, snapshots.twist).sum(axis=0)
            if two:
                pairs = singlet_fraction.pairs_at_twists(system, separations, snapshots.twist)
                singlets += pairs.sum(axis=0)
        for label in range(len(populations)):
            populations[label] += np.count_nonzero(snapshots.component == label)
        if done < keep:
            kept.append(snapshots.first(keep - done))
        done += count
    arrays = {f"{name}.{key}": part for name in tallies for key, part in tallies[name].items()}
    arrays["population_sum"] = populations
    if averaged:
        bulk = np.array(run.gas.populations) * energy.bulk_per_particle(run.gas)
        arrays["energy_ratio"] = energies / (run.batch_size * bulk)
        if two:
            arrays["singlet_pairs"] = singlets
    return arrays | _stack(kept, system)


def _stack(kept: list[Snapshots], system: System) -> Arrays:
    """Return the kept snapshots of a batch as arrays."""
    together = joined(kept, system.gas.particles, system.gas.dimension)
    position = together.position.astype(np.float32)
    position[position >= 1.0] = 0.0  # rounded up to the other face of the box
    arrays: Arrays = {"kept.position": position, "kept.component": together.component}
    if system.averaged:
        shape = (len(position), system.gas.dimension)
        arrays["kept.twist"] = together.twist.reshape(shape)
    return arrays
