import json
import os
import socket
import subprocess
import sys
import time
from pathlib import Path

import pytest

from generator import lock
from generator.disk import WriteError
from generator.lock import LockedError, OwnerLock, is_running, process_start


def write_lock(path: Path, *, host: str | None = None, process: int, started: int = 0) -> None:
    content = {"host": host or socket.gethostname(), "process": process, "started": started, "token": "t"}
    path.write_text(json.dumps(content))


def dead_process() -> int:
    with subprocess.Popen([sys.executable, "-c", ""]) as child:
        child.wait()
    return child.pid


def test_a_second_writer_is_refused_by_name(tmp_path: Path) -> None:
    """The refusal names the process and machine that hold the folder."""
    named = f"by process {os.getpid()} on {socket.gethostname()}"
    with OwnerLock(tmp_path / "lock"), pytest.raises(LockedError, match=named):
        OwnerLock(tmp_path / "lock").acquire()
    assert list(tmp_path.iterdir()) == []


def test_the_lock_is_free_again(tmp_path: Path) -> None:
    """After release another owner takes it."""
    with OwnerLock(tmp_path / "lock"):
        pass
    with OwnerLock(tmp_path / "lock"):
        assert (tmp_path / "lock").exists()


def test_a_dead_owner_is_taken_over(tmp_path: Path) -> None:
    """The lock of a process that no longer runs on this machine does not stop anybody."""
    write_lock(tmp_path / "lock", process=dead_process())
    with OwnerLock(tmp_path / "lock"):
        assert json.loads((tmp_path / "lock").read_text())["process"] == os.getpid()


@pytest.mark.skipif(not Path("/proc/self/stat").exists(), reason="this system does not tell when a process started")
def test_a_reused_process_number_is_taken_over(tmp_path: Path) -> None:
    """A running process that started at another moment than the owner is not the owner."""
    write_lock(tmp_path / "lock", process=os.getpid(), started=process_start(os.getpid()) + 1)
    with OwnerLock(tmp_path / "lock"):
        pass


def test_another_machine_is_believed_while_its_heart_beats(tmp_path: Path) -> None:
    """A lock of another machine holds until it was not renewed for long."""
    path = tmp_path / "lock"
    write_lock(path, host="elsewhere", process=1)
    with pytest.raises(LockedError, match="process 1 on elsewhere"):
        OwnerLock(path).acquire()
    old = time.time() - lock.HEARTBEAT_STALE_AFTER - 5
    os.utime(path, (old, old))
    with OwnerLock(path):
        pass


@pytest.mark.parametrize("content", ["", "{", "[]", '{"host": 1}'])
def test_a_lock_without_an_owner_is_taken_over(tmp_path: Path, content: str) -> None:
    """A lock file that names nobody holds nothing."""
    (tmp_path / "lock").write_text(content)
    with OwnerLock(tmp_path / "lock"):
        pass


def test_a_lost_lock_is_noticed(tmp_path: Path) -> None:
    """An owner whose lock another process took over stops writing, and leaves the other's lock."""
    path = tmp_path / "lock"
    mine = OwnerLock(path)
    mine.acquire()
    write_lock(path, host="elsewhere", process=7)
    with pytest.raises(LockedError, match="taken over by process 7 on elsewhere"):
        mine.beat(now=time.monotonic() + 1000)
    mine.release()
    assert path.exists()


def test_a_beat_renews(tmp_path: Path) -> None:
    """A beat sets the lock's time, and makes the lock again where its folder was removed."""
    path = tmp_path / "inner" / "lock"
    mine = OwnerLock(path)
    mine.acquire()
    os.utime(path, (0, 0))
    mine.beat(now=time.monotonic() + 1000)
    assert path.stat().st_mtime > 0
    path.unlink()
    path.parent.rmdir()
    mine.beat(now=time.monotonic() + 5000)
    assert path.exists()


def test_a_file_instead_of_the_folder_is_a_write_error(tmp_path: Path) -> None:
    """Where no lock can be written nobody writes, and the message says why."""
    (tmp_path / "output").write_text("x")
    with pytest.raises(WriteError, match="the folder output can't be written"):
        OwnerLock(tmp_path / "output" / "lock").acquire()


def test_one_of_many_gets_a_stale_lock(tmp_path: Path) -> None:
    """Of processes that all find a stale lock exactly one is the owner at a time."""
    path = tmp_path / "lock"
    code = (
        "import sys, time; from pathlib import Path; from generator.lock import OwnerLock, LockedError\n"
        "path = Path(sys.argv[1])\n"
        "for _ in range(40):\n"
        "    try:\n"
        "        with OwnerLock(path / 'lock'):\n"
        "            (path / 'busy').mkdir(); time.sleep(0.001); (path / 'busy').rmdir()\n"
        "    except LockedError: time.sleep(0.001)\n"
    )
    write_lock(path, process=dead_process())
    rivals = [subprocess.Popen([sys.executable, "-c", code, str(tmp_path)]) for _ in range(3)]
    assert [rival.wait(60) for rival in rivals] == [0, 0, 0]


def test_running_processes() -> None:
    """This process runs, a finished one doesn't, and nonsense numbers don't."""
    assert is_running(os.getpid(), process_start(os.getpid()))
    assert not is_running(dead_process(), 0)
    assert not is_running(2**200, 0)
