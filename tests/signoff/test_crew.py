"""Crews: the same bytes whoever works, workers that die, and clusters that are not there."""

from __future__ import annotations

import multiprocessing
import os
import signal
import socket
import subprocess
import sys
import threading
import time
from concurrent.futures import ProcessPoolExecutor, ThreadPoolExecutor
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from types import SimpleNamespace

import dask
import pytest
from distributed import LocalCluster

from biasband.boards.job import Job, merged
from biasband.boards.running import in_order
from biasband.boards.streams import Block, plain
from biasband.boards.tally import Bound, Scale, Tally
from biasband.errors import BiasbandError, UsageError
from biasband.signoff import cluster
from biasband.signoff import crew as crews
from biasband.signoff.crew import LARGE, UNKNOWN, Crew, crew
from biasband.variation.corners import corners
from biasband.variation.evaluation import cut_off_current
from biasband.variation.points_of_use import points_of_use
from tests.boards.tallies import differences
from tests.variation.stages import coupled, some

TASKS = 8
MOST_SECONDS = 240
"""A test takes a few seconds; on a machine that does a lot else, this much at most."""


@pytest.fixture(autouse=True)
def limited_in_time():
    """Ends a test that hangs."""

    def too_long(number, frame):
        raise TimeoutError(f"not done in {MOST_SECONDS} s")

    before = signal.signal(signal.SIGALRM, too_long)
    signal.alarm(MOST_SECONDS)
    yield
    signal.alarm(0)
    signal.signal(signal.SIGALRM, before)


@dataclass(frozen=True)
class Short:
    """Boards in `TASKS` short tasks. In the middle of the run the process that works is killed.

    That happens where `deaths` names a folder, in task 3, as often as it takes to fill it with `times` files.
    """

    deaths: str = ""
    times: int = 1

    boards = 128 * TASKS
    tasks = TASKS

    def blocks(self, numbers, task):
        """One block a task."""
        if self.deaths and task == 3 and len(os.listdir(self.deaths)) < self.times:
            Path(self.deaths, str(time.monotonic_ns())).touch()
            os.kill(os.getpid(), signal.SIGKILL)
        yield Block(128 * task, plain(numbers, slice(128 * task, 128 * (task + 1)), seed=1))


def job_of(source: Short) -> Job:
    """A job on a stage where everything varies."""
    of = coupled()
    cut_off = cut_off_current(of)
    ranges = corners(of, some(of, "collector_voltage", "transistor_power"), cut_off=cut_off).ranges
    scales = {name: Scale(each.low.value, each.high.value) for name, each in ranges.items()}
    bounds = (Bound("collector_voltage", low=3.0),)
    return Job(of, scales, bounds, points_of_use(of), source, seed=1, cut_off=cut_off)


@cache
def expected() -> Tally:
    """The job's tally, one task after the other."""
    return merged(map(job_of(Short()).work, range(TASKS)))


def by(hands: Crew, source: Short | None = None) -> Tally:
    """The job's tally as a crew comes to it."""
    job = job_of(source or Short())
    return merged(in_order(job.work, TASKS, executor=hands.executor, ahead=2 * hands.workers))


def cluster_of(workers: int, tmp_path: Path) -> LocalCluster:
    """A cluster of worker processes with one thread each, on ports that are free."""
    return LocalCluster(
        n_workers=workers, threads_per_worker=1, processes=True, host="127.0.0.1", dashboard_address=":0",
        local_directory=str(tmp_path / "dask"),
    )  # fmt: skip


@pytest.fixture
def two_workers(tmp_path):
    """A cluster of two worker processes."""
    with cluster_of(2, tmp_path) as found:
        yield found


def words_of(logger: str, caplog) -> list[str]:
    """What a logger said."""
    return [each.getMessage() for each in caplog.records if each.name == logger]


@pytest.fixture
def two_cores(monkeypatch):
    """Every run is large, and this machine has two cores."""
    monkeypatch.setattr(crews, "LARGE", 1)
    monkeypatch.setattr(crews, "cores", lambda: 2)


@pytest.fixture
def listening():
    """Listens on a port, and greets whoever comes as it is told."""
    sockets = []

    def greeting(words: bytes) -> str:
        server = socket.create_server(("127.0.0.1", 0))
        sockets.append(server)
        threading.Thread(target=greet, args=(server, words), daemon=True).start()
        return f"tcp://127.0.0.1:{server.getsockname()[1]}"

    def greet(server, words):
        while True:
            try:
                sockets.append(server.accept()[0])
            except OSError:  # closed: the test is over
                return
            sockets[-1].sendall(words)

    yield greeting
    for each in sockets:
        each.close()


def test_small_run_stays_in_this_process():
    with crew(LARGE - 1) as hands:
        assert hands == Crew(None, 1)
        assert differences(by(hands), expected()) == []


def test_large_run_takes_all_cores_for_the_same_bytes(two_cores):
    with crew(LARGE) as hands:
        assert hands.workers == 2
        pids = {hands.executor.submit(os.getpid).result() for _ in range(10)}
        assert os.getpid() not in pids
        assert differences(by(hands), expected()) == []


@pytest.mark.parametrize(
    "count, boards, wanted", [(1, LARGE, 1), (16, LARGE - 1, 1), (9, LARGE, 9), (64, LARGE, 16)]
)
def test_no_process_is_started_that_has_nothing_to_do(monkeypatch, count, boards, wanted):
    # 2^20 boards are 16 tasks of 2^16.
    monkeypatch.setattr(crews, "cores", lambda: count)
    assert crews._wanted(boards) == wanted


def test_worker_of_a_pool_of_daemons_starts_no_processes(monkeypatch):
    monkeypatch.setattr(crews, "cores", lambda: 4)
    assert crews._wanted(LARGE) == 4
    monkeypatch.setattr(multiprocessing, "current_process", lambda: SimpleNamespace(daemon=True))
    assert crews._wanted(LARGE) == 1


def test_threads_handed_in_give_the_same_bytes_and_stay_open():
    with ThreadPoolExecutor(3) as threads:
        with crew(LARGE, executor=threads) as hands:
            assert (hands.executor, hands.workers) == (threads, 3)
            assert differences(by(hands), expected()) == []
        assert threads.submit(abs, -1).result() == 1


def test_processes_handed_in_give_the_same_bytes_and_stay_open():
    with ProcessPoolExecutor(2, mp_context=multiprocessing.get_context("spawn")) as processes:
        with crew(LARGE, executor=processes) as hands:
            assert (hands.executor, hands.workers) == (processes, 2)
            assert differences(by(hands), expected()) == []
        assert processes.submit(abs, -1).result() == 1


def test_executor_that_says_nothing_of_itself_gets_many_tasks():
    executor = SimpleNamespace()
    with crew(1, executor=executor) as hands:
        assert hands == Crew(executor, UNKNOWN)


def test_cluster_and_executor_at_once_are_refused():
    with (
        ThreadPoolExecutor(1) as threads,
        pytest.raises(UsageError, match="cluster, executor: one of the two"),
        crew(1, cluster="tcp://127.0.0.1:1", executor=threads),
    ):
        pass


def test_worker_of_a_cluster_that_dies_mid_run_changes_and_loses_nothing(two_workers, tmp_path, caplog):
    deaths = tmp_path / "deaths"
    deaths.mkdir()
    with crew(1, cluster=two_workers.scheduler_address) as hands:
        assert hands.workers == 2
        assert differences(by(hands, Short(str(deaths))), expected()) == []
    assert len(list(deaths.iterdir())) == 1  # it did die
    assert hands.executor._client.status == "closed"
    assert words_of("distributed.client", caplog) == []  # else it tells of results that it could not gather


def test_task_that_every_worker_dies_of_is_given_up(tmp_path):
    deaths = tmp_path / "deaths"
    deaths.mkdir()
    with (
        dask.config.set({"distributed.scheduler.allowed-failures": 0}),
        cluster_of(1, tmp_path) as found,
        pytest.raises(BiasbandError, match="one task was begun on several workers, and each died of it"),
        crew(1, cluster=found.scheduler_address) as hands,
    ):
        by(hands, Short(str(deaths), times=100))


def test_scheduler_that_is_lost_mid_run_is_an_error(two_workers, caplog):
    address = two_workers.scheduler_address
    with (
        pytest.raises(BiasbandError, match=f"--cluster: the scheduler at {address} is gone"),
        crew(1, cluster=address) as hands,
    ):
        waiting = hands.executor.submit(time.sleep, MOST_SECONDS)
        two_workers.close()
        waiting.result()
    assert words_of("distributed.client", caplog) == []


def test_workers_of_another_version_are_refused(two_workers, monkeypatch):
    monkeypatch.setattr(cluster, "VERSION", "0.0.0")  # here: the workers are other processes
    with (
        pytest.raises(UsageError, match=r"2 of 2 workers do not have what is here: biasband 0\.0\.0, numpy"),
        crew(1, cluster=two_workers.scheduler_address),
    ):
        pass


def test_cluster_without_workers_is_refused(tmp_path):
    with (
        cluster_of(0, tmp_path) as found,
        pytest.raises(UsageError, match=f"the scheduler at {found.scheduler_address} has no workers yet"),
        crew(1, cluster=found.scheduler_address),
    ):
        pass


def test_nobody_at_the_address_is_an_error_without_a_word_of_distributed(capfd):
    with socket.create_server(("127.0.0.1", 0)) as closed:
        address = f"tcp://127.0.0.1:{closed.getsockname()[1]}"
    with (
        pytest.raises(UsageError, match=f"--cluster: no scheduler answers at {address} within 5 s"),
        crew(1, cluster=address),
    ):
        pass
    assert capfd.readouterr() == ("", "")


# Distributed takes the greeting for the length of what follows, and waits for a silent one without end.
@pytest.mark.parametrize("words", [b"", b"SSH-2.0-an_invented_server\r\n"], ids=["silence", "greeting"])
def test_something_else_at_the_address_is_an_error(listening, monkeypatch, words, capfd):
    monkeypatch.setattr(cluster, "PATIENCE", 1.0)
    address = listening(words)
    with (
        pytest.raises(UsageError, match=f"no scheduler answers at {address} within 1 s"),
        crew(1, cluster=address),
    ):
        pass
    assert capfd.readouterr() == ("", "")


@pytest.mark.parametrize(
    "address", ["", "bench", "tcp://bench", "tcp://:8786", "tcp://bench:99999", "tcp://bench:x", "http://bench:80"]
)
def test_address_that_is_none_is_refused(address):
    with pytest.raises(UsageError, match=f"no scheduler can be at '{address}'; allowed: tcp://host:port"):
        crew(1, cluster=address).__enter__()


def test_missing_extra_is_an_error_that_says_how_to_get_it(monkeypatch):
    monkeypatch.setitem(sys.modules, "distributed", None)
    with pytest.raises(UsageError, match=r"not installed: pip install 'biasband\[cluster\]'"):
        crew(1, cluster="tcp://127.0.0.1:8786").__enter__()


def test_own_process_that_dies_is_an_error_that_says_why(two_cores, tmp_path):
    with (
        pytest.raises(BiasbandError, match="one of 2 was stopped from outside, most likely because memory"),
        crew(LARGE) as hands,
    ):
        by(hands, Short(str(tmp_path)))


def test_own_processes_never_get_an_interrupt(two_cores):
    with crew(LARGE) as hands:
        # Ignored, and held back from before there was anything to ignore it.
        assert hands.executor.submit(signal.getsignal, signal.SIGINT).result() == signal.SIG_IGN
        assert signal.SIGINT in hands.executor.submit(signal.pthread_sigmask, signal.SIG_BLOCK, ()).result()
    assert signal.SIGINT not in signal.pthread_sigmask(signal.SIG_BLOCK, ())


SCRIPT = """
import os, time
from biasband.signoff import crew as crews
crews.cores = lambda: 2
os.write(1, b"here\\n")  # in one piece, for workers say so too
{guard}
    with crews.crew(crews.LARGE) as hands:
        print("ready", flush=True)
        hands.executor.submit(time.sleep, 0.1).result()
        time.sleep({rest})
        print("done", flush=True)
"""


def started(tmp_path: Path, guard: str, *, rest: float = 0.0) -> subprocess.Popen[str]:
    """A script that does a large run, and then takes a rest [s]."""
    script = tmp_path / "script.py"
    script.write_text(SCRIPT.format(guard=guard, rest=rest))
    root = str(Path(crews.__file__).parent.parent.parent)
    return subprocess.Popen(
        [sys.executable, str(script)], env={**os.environ, "PYTHONPATH": root}, text=True,
        stdout=subprocess.PIPE, stderr=subprocess.PIPE,
    )  # fmt: skip


def test_script_with_a_guard_runs(tmp_path):
    with started(tmp_path, 'if __name__ == "__main__":') as script:
        said, complaints = script.communicate(timeout=MOST_SECONDS)
    assert (script.returncode, complaints) == (0, "")
    assert sorted(said.split()) == ["done", "here", "here", "here", "ready"]  # workers read it once more


def test_script_without_a_guard_is_told_so_once(tmp_path):
    with started(tmp_path, "if True:") as script:
        said, complaints = script.communicate(timeout=MOST_SECONDS)
    assert script.returncode == 1
    assert set(said.split()) == {"here"} and len(said.split()) <= 3
    assert 'must stand below `if __name__ == "__main__":`' in complaints.splitlines()[-1]
    assert complaints.count("biasband.errors.UsageError") == 1
    assert "bootstrapping" not in complaints  # the words of multiprocessing, from each worker


def test_processes_of_a_killed_run_end(tmp_path):
    with started(tmp_path, 'if __name__ == "__main__":', rest=2.0 * MOST_SECONDS) as script:
        while script.stdout.readline() != "ready\n":
            assert script.poll() is None
        script.kill()
        script.communicate(timeout=60.0)  # ends when nobody is left who could write to its output
