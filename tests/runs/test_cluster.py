"""The same job in threads, in processes, in other blocks and with workers that die."""

import itertools
import os
import signal
import threading
import time

import pytest
from distributed import Client, LocalCluster
from hypothesis import given, settings
from hypothesis import strategies as st

import mapper
from mapper import cluster, pipeline
from tests.making import command
from tests.runs.worlds import (
    N_BLOCKS,
    N_COLS,
    N_ROWS,
    SMALL_BLOCKS,
    contents,
    make_world,
    quiet_main,
)

pytestmark = [
    pytest.mark.filterwarnings("ignore:.*:ResourceWarning"),
    # the worker that the test killed
    pytest.mark.filterwarnings("ignore::pytest.PytestUnraisableExceptionWarning"),
]


@pytest.fixture(scope="module")
def one_thread(tmp_path_factory):
    """The job, and what a run on one thread in small blocks leaves."""
    folder = tmp_path_factory.mktemp("cluster")
    job = make_world(folder / "world")
    code, _, errors = quiet_main(
        "run", job, "--out", folder / "one", "--memory", SMALL_BLOCKS, "--threads", 1
    )
    assert code == 0, errors
    return job, contents(folder / "one")


@pytest.mark.parametrize("memory", [SMALL_BLOCKS, "700MB", "2GB"])
def test_two_threads_and_other_blocks_give_the_same_bytes(one_thread, tmp_path, memory):
    job, expected = one_thread
    code, _, errors = quiet_main("run", job, "--out", tmp_path, "--memory", memory, "--threads", 2)
    assert code == 0, errors
    assert contents(tmp_path) == expected


@settings(max_examples=6)
@given(n_rows=st.integers(60, N_ROWS), n_cols=st.integers(60, N_COLS))
def test_blocks_of_any_shape_give_the_same_bytes(one_thread, tmp_path_factory, n_rows, n_cols):
    job, expected = one_thread
    out = tmp_path_factory.mktemp("shape")
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(pipeline, "block_shape", lambda *_: (n_rows, n_cols))
        mapper.run(mapper.load_job(job), out=out)
    assert contents(out) == expected


def test_two_local_processes_give_the_same_bytes_and_say_nothing_else(one_thread, tmp_path):
    job, expected = one_thread
    done = command(
        "run", job, "--out", tmp_path, "--memory", SMALL_BLOCKS, "--scheduler", "local",
        "--threads", 2,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert contents(tmp_path) == expected
    assert [line for line in done.stderr.splitlines() if "million cells/s" not in line] == []
    assert [one.name for one in tmp_path.rglob(".*")] == []


def test_a_worker_killed_on_the_way_does_not_show_and_progress_is_told(one_thread, tmp_path):
    job, expected = one_thread
    told = []
    blocks = tmp_path / ".work" / "blocks"

    def kill_one(pid):
        end = time.monotonic() + 60
        while len(list(blocks.glob("[0-9]*.npz"))) < 5 and time.monotonic() < end:
            time.sleep(0.001)
        os.kill(pid, signal.SIGKILL)
        told.append(("killed", len(list(blocks.glob("[0-9]*.npz"))), N_BLOCKS))

    with (
        LocalCluster(
            n_workers=2, threads_per_worker=1, dashboard_address=None, silence_logs=50
        ) as there,
        Client(there, set_as_default=False) as client,
    ):
        pids = client.run(os.getpid)
        killer = threading.Thread(target=kill_one, args=(next(iter(pids.values())),))
        killer.start()
        engine = pipeline.Engine(scheduler=there.scheduler_address, memory=5e8)
        mapper.run(
            mapper.load_job(job), out=tmp_path, engine=engine,
            progress=lambda *one: told.append(one),
        )  # fmt: skip
        killer.join()
    assert contents(tmp_path) == expected
    ((_, n_done, _),) = [one for one in told if one[0] == "killed"]
    assert 5 <= n_done < N_BLOCKS
    steps = [done for stage, done, _ in told if stage == "blocks"]
    assert len(steps) == N_BLOCKS + 1
    assert all(later > sooner for sooner, later in itertools.pairwise(steps))
    assert (steps[0], steps[-1]) == (0, N_ROWS * N_COLS)


def test_an_address_where_nobody_answers_is_the_users_input(one_thread, tmp_path, monkeypatch):
    monkeypatch.setattr(cluster, "CONNECT_SECONDS", 0.5)
    for address in ("tcp://127.0.0.1:9", "nonsense://x", "locale"):
        code, _, errors = quiet_main(
            "run", one_thread[0], "--out", tmp_path, "--scheduler", address
        )
        assert code == 2, errors
        assert f"no scheduler answers at {address!r}" in errors
        assert "--scheduler local" in errors


def test_a_scheduler_without_workers_is_the_users_input(one_thread, tmp_path, monkeypatch):
    monkeypatch.setattr(cluster, "CONNECT_SECONDS", 1.0)
    with LocalCluster(n_workers=0, dashboard_address=None, silence_logs=50) as empty:
        code, _, errors = quiet_main(
            "run", one_thread[0], "--out", tmp_path, "--scheduler", empty.scheduler_address
        )
    assert code == 2
    assert "has no workers" in errors
    assert "dask worker tcp://" in errors
