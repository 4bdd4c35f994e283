"""Runs that are killed, short of room or met by another run: nothing is lost, nothing is half."""

import multiprocessing
import os
import random
import shutil
import subprocess
import time

import pytest
import rasterio

from mapper import pipeline
from mapper.cli import main
from mapper.errors import RunFolderError
from tests.runs.worlds import (
    N_BLOCKS,
    SMALL_BLOCKS,
    contents,
    final_files,
    make_world,
    open_whole,
    quiet_main,
)

KILLS = 20
BLOCK = (64, 64)
STAGES = ("start", "blocks", "maps", "tables", "record")
PROCESSES = multiprocessing.get_context("forkserver")
PROCESSES.set_forkserver_preload(["mapper.pipeline", "mapper.planning"])


@pytest.fixture(autouse=True, scope="module")
def _small_blocks():
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(pipeline, "block_shape", lambda *_: BLOCK)
        yield


@pytest.fixture(scope="module")
def undisturbed(_small_blocks, tmp_path_factory):
    """The job, and the folder of a run that nothing disturbed."""
    folder = tmp_path_factory.mktemp("survival")
    job = make_world(folder / "world", side=64)
    code, out, errors = quiet_main("run", job, "--out", folder / "whole", "--memory", SMALL_BLOCKS)
    assert code == 0, errors
    assert "finished blocks" not in out
    return job, folder / "whole"


def start(job, out):
    """The run as a process of its own, its libraries loaded already."""
    arguments = ["run", str(job), "--out", str(out), "--memory", SMALL_BLOCKS, "--threads", "2"]
    process = PROCESSES.Process(target=_silent_main, args=(arguments,))
    process.start()
    return process


def _silent_main(arguments):
    pipeline.block_shape = lambda *_: BLOCK
    nowhere = os.open(os.devnull, os.O_WRONLY)
    os.dup2(nowhere, 1)
    os.dup2(nowhere, 2)
    raise SystemExit(main(arguments))


def reached(stage, out, n_wanted):
    """Whether a run has come as far as a stage."""
    if stage == "start":
        return True
    if stage == "blocks":
        return len(list((out / ".work" / "blocks").glob("[0-9]*.npz"))) >= n_wanted
    if stage == "maps":
        return any(out.glob("maps/.part-*"))
    if stage == "tables":
        return (out / "tables" / "regions.csv").exists()
    return (out / "ro-crate-metadata.json").exists()


def kill_at(process, out, stage, chance):
    """Kill a run at a random moment of a stage; false where it had ended before."""
    wanted, delay = chance.randint(1, N_BLOCKS), chance.random()
    end = time.monotonic() + 60
    while process.is_alive() and not reached(stage, out, wanted) and time.monotonic() < end:
        time.sleep(0.001)
    time.sleep(delay * {"start": 0.5, "blocks": 0.02, "maps": 0.3}.get(stage, 0.05))
    process.kill()
    process.join()
    return process.exitcode == -9


def finished_blocks(out):
    blocks = (out / ".work" / "blocks").glob("[0-9]*.npz")
    return {one.name: (one.stat().st_ino, one.stat().st_mtime_ns) for one in blocks}


def check_whole(out, whole):
    """Every file under a final name opens, and a map or table is the undisturbed run's."""
    for path in final_files(out):
        open_whole(path)
        name = path.relative_to(out).as_posix()
        if name in whole:
            assert path.read_bytes() == whole[name], name


def test_a_run_killed_at_20_random_points_ends_with_the_same_bytes(undisturbed, tmp_path):
    job, whole_folder = undisturbed
    whole, chance = contents(whole_folder), random.Random(20)  # noqa: S311 - any points do
    out = tmp_path / "out"
    hit = dict.fromkeys(STAGES, 0)
    kept = {}
    runs = 0
    while sum(hit.values()) < KILLS:
        runs += 1
        assert runs < 3 * KILLS
        stage = STAGES[(runs - 1) % len(STAGES)]
        process = start(job, out)
        was_killed = kill_at(process, out, stage, chance)
        assert was_killed or process.exitcode == 0
        hit[stage] += was_killed
        check_whole(out, whole)
        blocks = finished_blocks(out)
        if (out / ".work" / "fingerprint.json").exists():  # else the run was at its last step
            assert {name: blocks.get(name) for name in kept} == kept, "computed again"
        kept = blocks
        if stage == "record" and sum(hit.values()) < KILLS:  # now from the start again
            shutil.rmtree(out)
            kept = {}
    assert min(hit.values()) >= 1, hit
    _end_well(job, out, whole)


def _end_well(job, out, whole):
    """The same command to the end: the same bytes, kept blocks told, nothing left over."""
    n_kept = len(finished_blocks(out))
    note = (out / ".work" / "fingerprint.json").exists()
    code, said, errors = quiet_main("run", job, "--out", out, "--memory", SMALL_BLOCKS)
    assert code == 0, errors
    if note and n_kept:
        assert f"went on from {n_kept} finished blocks" in said
    assert contents(out) == whole
    assert [one.name for one in out.rglob(".*")] == []


def test_a_tile_that_lacks_its_end_in_the_last_block_is_named_with_file_and_offset(tmp_path):
    job = make_world(tmp_path, side=64)
    path = tmp_path / "temperature.tif"
    size = path.stat().st_size
    os.truncate(path, size - 40)
    code, _, errors = quiet_main("run", job, "--memory", SMALL_BLOCKS)
    assert code == 2
    assert "the file is cut short: block 5,6 (rows 320..384) needs bytes" in errors
    assert f"..{size}, and the file ends at {size - 40}" in errors
    assert "temperature.tif" in errors
    assert not (tmp_path / "out").exists()


def test_a_tile_damaged_in_the_last_block_is_named_and_the_blocks_before_it_are_kept(tmp_path):
    """The damage lies inside the file, so that it shows only when the last block is read."""
    job = make_world(tmp_path, side=64)
    path = tmp_path / "temperature.tif"
    good = path.read_bytes()
    with rasterio.open(path) as file:
        offset = int(file.get_tag_item("BLOCK_OFFSET_6_5", "TIFF", bidx=1))
    about = path.stat()
    path.write_bytes(good[:offset] + b"\xff" * (len(good) - offset))
    os.utime(path, ns=(about.st_atime_ns, about.st_mtime_ns))
    code, _, errors = quiet_main("run", job, "--memory", SMALL_BLOCKS, "--threads", 1)
    assert code == 2
    assert "temperature.tif" in errors
    assert str(offset) in errors
    n_kept = len(finished_blocks(tmp_path / "out"))
    path.write_bytes(good)
    os.utime(path, ns=(about.st_atime_ns, about.st_mtime_ns))
    code, said, errors = quiet_main("run", job, "--memory", SMALL_BLOCKS)
    assert code == 0, errors
    if n_kept:
        assert f"went on from {n_kept} finished blocks" in said


@pytest.fixture
def small_disk(tmp_path):
    """A disk of 2 MB: blocks and maps do not fit."""
    folder = tmp_path / "disk"
    folder.mkdir()
    mount = shutil.which("mount")
    done = mount and subprocess.run(
        [mount, "-t", "tmpfs", "-o", "size=2m", "tmpfs", str(folder)],
        capture_output=True, check=False,
    )  # fmt: skip
    if not done or done.returncode:
        pytest.skip("no right to mount a small disk")
    yield folder
    subprocess.run(["umount", str(folder)], check=True)


def test_a_disk_that_fills_up_is_told_and_the_blocks_before_are_kept(undisturbed, small_disk):
    job, whole_folder = undisturbed
    out = small_disk / "out"
    code, _, errors = quiet_main("run", job, "--out", out, "--memory", SMALL_BLOCKS)
    assert code == 2
    assert "cannot be written: No space left on device" in errors
    assert "make room and run the same command again" in errors
    check_whole(out, contents(whole_folder))
    kept = finished_blocks(out)
    assert kept
    subprocess.run(["mount", "-o", "remount,size=200m", str(small_disk)], check=True)
    code, said, errors = quiet_main("run", job, "--out", out, "--memory", SMALL_BLOCKS)
    assert code == 0, errors
    assert f"went on from {len(kept)} finished blocks" in said
    assert contents(out) == contents(whole_folder)


@pytest.mark.parametrize("step", ["write_map", "write_csv", "hand_over", "write_json"])
def test_a_disk_full_at_any_later_step_is_told_and_no_block_is_computed_again(
    undisturbed, tmp_path, monkeypatch, step
):
    job, whole_folder = undisturbed
    arguments = ("run", job, "--out", tmp_path / "out", "--memory", SMALL_BLOCKS)

    def full(*_args, **_kwargs):
        raise RunFolderError(
            "cannot be written: No space left on device", where="here", fix="make room"
        )

    with monkeypatch.context() as patched:
        patched.setattr(f"mapper.pipeline.{step}", full)
        code, _, errors = quiet_main(*arguments)
    assert code == 2
    assert "No space left on device" in errors
    assert not (tmp_path / "out" / "run.json").exists()
    check_whole(tmp_path / "out", contents(whole_folder))
    code, said, errors = quiet_main(*arguments)
    assert code == 0, errors
    assert f"went on from {N_BLOCKS} finished blocks" in said
    assert contents(tmp_path / "out") == contents(whole_folder)


def test_a_second_run_in_the_same_folder_is_refused_and_the_first_ends_well(undisturbed, tmp_path):
    job, whole_folder = undisturbed
    out = tmp_path / "out"
    process = start(job, out)
    end = time.monotonic() + 60
    while not reached("blocks", out, 1) and process.is_alive() and time.monotonic() < end:
        time.sleep(0.001)
    code, _, errors = quiet_main("run", job, "--out", out, "--memory", SMALL_BLOCKS)
    assert code == 2
    assert f"another run (process {process.pid}) is writing to this folder" in errors
    process.join()
    assert process.exitcode == 0
    assert contents(out) == contents(whole_folder)
