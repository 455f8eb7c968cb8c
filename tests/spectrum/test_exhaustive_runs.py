"""How a long enumeration behaves: executors, progress, checkpoints, interruption, refusals."""

from __future__ import annotations

import itertools
import os
import signal
import subprocess
import sys
from concurrent.futures import ProcessPoolExecutor, ThreadPoolExecutor
from pathlib import Path

import numpy as np
import pytest

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum import estimate
from hubokit.spectrum.checkpoint import Checkpoint
from hubokit.spectrum.derivatives import Layout
from hubokit.spectrum.estimate import duration
from hubokit.spectrum.exhaustive import count_local_minima, density_of_states, ground_states, low_levels
from hubokit.spectrum.level_walk import LowestLevels
from hubokit.spectrum.levels import Level
from hubokit.spectrum.polynomial import polynomial_of


def dense(size: int, locality: int, seed: int = 0, domain: str = "boolean", weight: int = 4) -> Hamiltonian:
    rng = np.random.default_rng(seed)
    members = [np.array(list(itertools.combinations(range(size), k))) for k in range(1, locality + 1)]
    weights = [rng.integers(-weight, weight + 1, len(rows)) for rows in members]
    return Hamiltonian.from_arrays(members, weights, domain=domain)


def chain(size: int, weight: int = 1) -> Hamiltonian:
    """Levels of very many states, so that lists are cut."""
    pairs = [[i, i + 1] for i in range(size - 1)]
    return Hamiltonian.from_arrays([[[0]], pairs], [[weight], [-1] * len(pairs)], domain="boolean", size=size)


def plain(levels: list[Level]) -> list[tuple[object, ...]]:
    return [(x.energy, x.degeneracy, x.gap, x.complete, x.states.tobytes()) for x in levels]


def test_threads_processes_and_one_worker_give_the_same_answer() -> None:
    H = chain(25)
    expected = plain(low_levels(H, 3, 20))
    with ThreadPoolExecutor(1) as one, ThreadPoolExecutor(3) as three, ProcessPoolExecutor(2) as processes:
        for executor in (one, three, processes):
            assert plain(low_levels(H, 3, 20, executor=executor)) == expected
            assert executor.submit(int, "1").result() == 1, "the caller's executor stays open"
        assert density_of_states(H, executor=processes) == density_of_states(H)
        assert count_local_minima(H, executor=processes) == count_local_minima(H)


@pytest.mark.slow
def test_the_executor_of_a_cluster_gives_the_same_answer() -> None:
    distributed = pytest.importorskip("distributed")
    H = chain(25)
    expected = plain(low_levels(H, 3, 20))
    with (
        distributed.LocalCluster(
            n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None, memory_limit=None
        ) as cluster,
        distributed.Client(cluster) as client,
    ):
        assert plain(low_levels(H, 3, 20, executor=client.get_executor())) == expected


def test_progress_names_every_slab_once() -> None:
    seen: list[tuple[int, int]] = []
    ground_states(chain(25), progress=lambda done, total: seen.append((done, total)))
    total = seen[-1][1]
    assert total > 1
    assert seen == [(done, total) for done in range(total + 1)]


def test_progress_of_a_small_model_is_one_step() -> None:
    seen: list[tuple[int, int]] = []
    ground_states(chain(6), progress=lambda done, total: seen.append((done, total)))
    assert seen == [(1, 1)]


def test_an_error_in_progress_ends_the_run_and_keeps_the_checkpoint_whole(tmp_path: Path) -> None:
    def progress(done: int, total: int) -> None:
        if done == 3:
            raise ZeroDivisionError

    H, path = chain(25), tmp_path / "run.checkpoint"
    with pytest.raises(ZeroDivisionError):
        low_levels(H, 3, 20, progress=progress, checkpoint=path)
    resumed: list[int] = []
    found = low_levels(H, 3, 20, progress=lambda done, total: resumed.append(done), checkpoint=path)
    assert resumed[0] == 3
    assert plain(found) == plain(low_levels(H, 3, 20))
    assert [p.name for p in tmp_path.iterdir()] == ["run.checkpoint"]


def test_a_finished_checkpoint_answers_at_once(tmp_path: Path) -> None:
    H, path = chain(25), tmp_path / "run.checkpoint"
    density = density_of_states(H, checkpoint=path)
    seen: list[int] = []
    assert density_of_states(H, checkpoint=path, progress=lambda done, total: seen.append(done)) == density
    assert len(seen) == 1


def test_the_checkpoint_of_another_model_or_question_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "run.checkpoint"
    ground_states(chain(25), checkpoint=path)
    before = path.read_bytes()
    for question in (
        lambda: ground_states(chain(26), checkpoint=path),
        lambda: ground_states(dense(25, 2), checkpoint=path),
        lambda: ground_states(chain(25, weight=2), checkpoint=path),
        lambda: low_levels(chain(25), 2, checkpoint=path),
        lambda: ground_states(chain(25), 7, checkpoint=path),
        lambda: density_of_states(chain(25), checkpoint=path),
    ):
        with pytest.raises(InputError, match="another model or another question"):
            question()
    assert path.read_bytes() == before


@pytest.mark.parametrize("content", [b"", b"valve,pump\n1,0\n", b"PK\x03\x04 cut off"])
def test_a_file_that_is_no_checkpoint_is_refused_and_kept(tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "answers.csv"
    path.write_bytes(content)
    with pytest.raises(InputError, match="no checkpoint"):
        ground_states(chain(25), checkpoint=path)
    assert path.read_bytes() == content


def test_a_checkpoint_in_a_missing_folder_is_refused_before_the_start(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="does not exist"):
        ground_states(chain(25), checkpoint=tmp_path / "no" / "run.checkpoint")


RUN = """
import sys, time
sys.path[:0] = [{root!r}, {here!r}]
import test_exhaustive_runs as t
from hubokit.spectrum import slabs
slabs.SAVE_SECONDS = 0.0
def progress(done, total):
    print(done, total, flush=True)
    time.sleep(0.4)  # so that there is time to interrupt it
print(t.plain(t.low_levels(t.long_model(), 2, 100, checkpoint={path!r}, progress=progress)))
"""


def long_model() -> Hamiltonian:
    """Seconds of work: 30 booleans, weights that need int64."""
    return dense(30, 3, weight=2**34)


def started(path: Path) -> subprocess.Popen[str]:
    here = Path(__file__).resolve().parent
    code = RUN.format(root=str(here.parents[1]), here=str(here), path=str(path))
    return subprocess.Popen([sys.executable, "-c", code], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)


def wait_for(process: subprocess.Popen[str], slabs_done: int) -> None:
    assert process.stdout is not None
    for line in process.stdout:
        if int(line.split()[0]) >= slabs_done:
            return
    raise AssertionError("the run ended before it could be interrupted")


def test_a_run_killed_in_the_middle_resumes_to_the_same_answer(tmp_path: Path) -> None:
    path = tmp_path / "run.checkpoint"
    process = started(path)
    wait_for(process, 2)
    process.kill()
    process.communicate()
    assert process.returncode == -signal.SIGKILL
    resumed: list[int] = []
    found = low_levels(long_model(), 2, 100, checkpoint=path, progress=lambda done, total: resumed.append(done))
    assert resumed[0] >= 1
    assert plain(found) == plain(low_levels(long_model(), 2, 100))


def test_an_interrupt_ends_a_run_soon_with_nothing_half_written(tmp_path: Path) -> None:
    path = tmp_path / "run.checkpoint"
    process = started(path)
    wait_for(process, 1)
    process.send_signal(signal.SIGINT)
    output, errors = process.communicate(timeout=60)
    assert "KeyboardInterrupt" in errors
    assert "(" not in output, "the run went on to its answer"
    assert [p.name for p in tmp_path.iterdir()] == ["run.checkpoint"]
    task = _task_of_long_model()
    done, _ = Checkpoint(path, task).load(task.layout.slabs)
    assert 1 <= done.sum() < len(done)


def _task_of_long_model() -> LowestLevels:
    from hubokit.spectrum.walk import layout_of

    reduced = polynomial_of(long_model()).merged()
    return LowestLevels(reduced, layout_of(reduced), 3, 100)


def test_a_run_that_would_take_too_long_is_refused_with_the_time_and_the_other_ways() -> None:
    with pytest.raises(LimitError, match=r"2\*\*27 states would take about .*0\.001.*elimination.*neighbourhood"):
        ground_states(dense(27, 2), time=0.001)
    with pytest.raises(LimitError, match="allowed"):
        density_of_states(dense(27, 2), time=0.001)
    with pytest.raises(LimitError, match="allowed"):
        count_local_minima(dense(27, 2), time=0.001)


def test_what_no_machine_could_do_is_refused_without_a_trial(monkeypatch: pytest.MonkeyPatch) -> None:
    def trial(task: LowestLevels, seconds: float) -> float:
        raise AssertionError

    monkeypatch.setattr(LowestLevels, "trial", trial)
    with pytest.raises(LimitError, match=r"at least .* days"):
        ground_states(dense(60, 2))
    with pytest.raises(LimitError, match="62 variables"):
        ground_states(chain(63))


def test_the_estimate_counts_only_what_a_checkpoint_leaves(tmp_path: Path) -> None:
    path = tmp_path / "run.checkpoint"
    H = dense(27, 2)
    level = ground_states(H, checkpoint=path)
    assert plain([ground_states(H, checkpoint=path, time=0.0)]) == plain([level])


def test_a_trial_ends_when_its_slab_does() -> None:
    polynomial = polynomial_of(dense(12, 2))
    assert LowestLevels(polynomial, Layout(6, 6, 0), 2, 10).trial(0.01) > 0


@pytest.mark.parametrize(
    ("seconds", "words"),
    [(0.25, "0.25 seconds"), (60, "60 seconds"), (600, "10 minutes"), (5400, "90 minutes"), (86400, "24 hours")],
)
def test_lengths_of_time_read_well(seconds: float, words: str) -> None:
    assert duration(seconds) == words


def test_workers_are_counted_from_the_executor() -> None:
    with ThreadPoolExecutor(3) as pool:
        assert estimate.workers_of(pool) == 3
    assert 1 <= estimate.workers_of(None) <= (os.cpu_count() or 1)


def test_numba_is_loaded_only_above_small_sizes() -> None:
    code = (
        "import sys; import hubokit.spectrum.exhaustive as x; from hubokit.model.hamiltonian import Hamiltonian;"
        "x.ground_states(Hamiltonian.from_arrays([[[0, 1], [5, 19]]], [[1, 2]], domain='boolean'));"
        "assert 'numba' not in sys.modules, 'loaded'"
    )
    root = Path(__file__).resolve().parents[2]
    assert subprocess.run([sys.executable, "-c", code], cwd=root, check=False).returncode == 0
