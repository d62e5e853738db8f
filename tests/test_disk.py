import errno
import os
import stat
import subprocess
import sys
import threading
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from generator import disk
from generator.disk import HeldError, WriteError, read_folder, stamp, sweep, write_whole

NAMES = {"assays.csv", "notes.md"}


def wanted(name: str) -> str | None:
    return name.lower() if name.lower() in NAMES else None


def test_only_wanted_files_are_read(tmp_path: Path) -> None:
    """A snapshot holds the files of the positive list, by canonical name, and nothing else."""
    (tmp_path / "assays.csv").write_bytes(b"a")
    (tmp_path / "Notes.MD").write_bytes(b"n")
    for name in ("~$assays.csv", ".~lock.assays.csv#", "assays.csv.bak", "3F2A1B00"):
        (tmp_path / name).write_bytes(b"x")
    assert read_folder(tmp_path, wanted).files == {"assays.csv": b"a", "notes.md": b"n"}


def test_the_exact_name_goes_before_a_near_miss(tmp_path: Path) -> None:
    """Of two entries with one canonical name the exact one is read, and the other is told."""
    (tmp_path / "ASSAYS.csv").write_bytes(b"other")
    (tmp_path / "assays.csv").write_bytes(b"mine")
    snapshot = read_folder(tmp_path, wanted)
    assert (snapshot.files["assays.csv"], snapshot.shadowed) == (b"mine", ("ASSAYS.csv",))


def test_what_is_no_file_is_unreadable_and_never_blocks(tmp_path: Path) -> None:
    """A folder, a pipe and a dead link in a file's place are told, not waited for."""
    (tmp_path / "assays.csv").mkdir()
    os.mkfifo(tmp_path / "notes.md")
    assert read_folder(tmp_path, wanted).unreadable == {
        "assays.csv": "it is not a file",
        "notes.md": "it is not a file",
    }
    (tmp_path / "assays.csv").rmdir()
    (tmp_path / "assays.csv").symlink_to(tmp_path / "nowhere.csv")
    assert read_folder(tmp_path, wanted).unreadable["assays.csv"] == "it is a link to a file that does not exist"


def test_a_missing_folder_is_empty(tmp_path: Path) -> None:
    """No folder, no files; and none of what is asked of it raises."""
    assert read_folder(tmp_path / "gone", wanted).files == {}
    assert stamp(tmp_path / "gone") is None


def test_a_file_is_read_up_to_a_limit(tmp_path: Path) -> None:
    """No more than the bytes asked for are read of a huge file."""
    (tmp_path / "assays.csv").write_bytes(b"x" * 100)
    assert read_folder(tmp_path, wanted, at_most=10).files == {"assays.csv": b"x" * 10}


def test_unchanged_bytes_touch_nothing(tmp_path: Path) -> None:
    """Writing what a file holds already returns False and leaves its stamp."""
    path = tmp_path / "page.html"
    assert write_whole(path, b"one")
    before = stamp(path)
    assert not write_whole(path, b"one")
    assert stamp(path) == before
    assert write_whole(path, b"two")
    assert path.read_bytes() == b"two"


@pytest.mark.parametrize("mask, mode", [(0o022, 0o644), (0o027, 0o640), (0o077, 0o600)])
def test_the_mode_follows_the_umask(tmp_path: Path, mask: int, mode: int) -> None:
    """Others can read a page where the umask lets them."""
    before = os.umask(mask)
    try:
        write_whole(tmp_path / "page.html", b"x")
    finally:
        os.umask(before)
    assert stat.S_IMODE((tmp_path / "page.html").stat().st_mode) == mode


def test_an_open_reader_keeps_the_old_bytes(tmp_path: Path) -> None:
    """A reader that has the page open is not disturbed by its replacement."""
    path = tmp_path / "page.html"
    write_whole(path, b"old")
    with path.open("rb") as reader:
        write_whole(path, b"new")
        assert reader.read() == b"old"


class Refusing:
    """Stands for Path.replace on a file server: refuses as often as told."""

    def __init__(self, monkeypatch: pytest.MonkeyPatch, times: int, number: int = errno.EACCES) -> None:
        self.left, self.number = times, number
        self.pauses: list[float] = []
        original = Path.replace

        def replace(source: Path, target: Path) -> Path:
            if self.left > 0:
                self.left -= 1
                raise OSError(self.number, os.strerror(self.number))
            return original(source, target)

        monkeypatch.setattr(Path, "replace", replace)


@pytest.mark.parametrize("number", [errno.EACCES, errno.EPERM, errno.EBUSY])
@pytest.mark.parametrize("times", [1, len(disk.RETRY_PAUSES)])
def test_a_refused_replace_is_tried_again(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, times: int, number: int
) -> None:
    """A file that another program holds for a while is replaced when it lets go, after growing pauses."""
    write_whole(tmp_path / "page.html", b"old")
    refusing = Refusing(monkeypatch, times, number)
    assert write_whole(tmp_path / "page.html", b"new", pause=refusing.pauses.append)
    assert (tmp_path / "page.html").read_bytes() == b"new"
    assert refusing.pauses == sorted(refusing.pauses)
    assert len(refusing.pauses) == times


def test_a_replace_refused_for_good_leaves_the_old_page(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A file that stays held keeps its old bytes, nothing is left beside it, and the error is its own."""
    write_whole(tmp_path / "page.html", b"old")
    refusing = Refusing(monkeypatch, 1000)
    with pytest.raises(HeldError, match=r"page\.html is held by another program"):
        write_whole(tmp_path / "page.html", b"new", pause=refusing.pauses.append)
    assert [path.name for path in tmp_path.iterdir()] == ["page.html"]
    assert (tmp_path / "page.html").read_bytes() == b"old"


def test_a_windows_sharing_error_counts_as_held() -> None:
    """WinError 32 is the error of a file in use."""
    error = OSError()
    error.winerror = 32  # type: ignore[attr-defined]
    assert disk.is_held(error)
    assert not disk.is_held(OSError(errno.ENOSPC, "full"))


def test_a_full_disk_is_a_write_error(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A full disk is told by name, and nothing is left half-written."""

    def full(path: Path, data: bytes, *, durable: bool = False) -> None:
        path.write_bytes(data[:1])
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr(disk, "create", full)
    with pytest.raises(WriteError, match=r"page\.html could not be written \(no space left on device\)"):
        write_whole(tmp_path / "page.html", b"new")
    assert list(tmp_path.iterdir()) == []


def test_a_folder_in_the_way_is_a_write_error(tmp_path: Path) -> None:
    """A folder where the file should be is refused at once, and stays."""
    (tmp_path / "page.html").mkdir()
    with pytest.raises(WriteError):
        write_whole(tmp_path / "page.html", b"new", pause=pytest.fail)
    assert [path.name for path in tmp_path.iterdir()] == ["page.html"]


def test_readers_never_meet_a_part(tmp_path: Path) -> None:
    """Readers during 300 replacements meet whole pages only, and always a page."""
    path = tmp_path / "page.html"
    contents = [bytes([65 + turn]) * (50_000 + turn) for turn in range(2)]
    write_whole(path, contents[0])
    stop = threading.Event()
    strange: list[object] = []

    def read() -> None:
        while not stop.is_set():
            try:
                data = path.read_bytes()
            except OSError as error:
                strange.append(error)
                continue
            if data not in contents:
                strange.append(len(data))

    readers = [threading.Thread(target=read) for _ in range(2)]
    for reader in readers:
        reader.start()
    for turn in range(300):
        write_whole(path, contents[turn % 2 - 1])
    stop.set()
    for reader in readers:
        reader.join()
    assert strange == []


def test_a_killed_writer_leaves_what_sweep_removes(tmp_path: Path) -> None:
    """After kill -9 between write and rename the old page stands, and sweep removes the rest."""
    page = tmp_path / "page.html"
    write_whole(page, b"old")
    code = (
        "import os, signal, sys; from pathlib import Path; from generator.disk import write_whole\n"
        "write_whole(Path(sys.argv[1]), b'new', before_replace=lambda path: os.kill(os.getpid(), signal.SIGKILL))"
    )
    killed = subprocess.run([sys.executable, "-c", code, str(page)], check=False)
    assert killed.returncode == -9
    assert page.read_bytes() == b"old"
    assert len(list(tmp_path.iterdir())) == 2
    assert sweep([tmp_path, tmp_path / "gone"]) == 1
    assert [path.name for path in tmp_path.iterdir()] == ["page.html"]


def test_sweep_removes_unfinished_folders(tmp_path: Path) -> None:
    """A folder that a killed writer was filling goes with what it holds; a link to one only goes itself."""
    (tmp_path / "kept").mkdir()
    (tmp_path / "kept/page.html").write_text("x")
    (tmp_path / ".hullbook-00000000.tmp/orders").mkdir(parents=True)
    (tmp_path / ".hullbook-11111111.tmp").symlink_to(tmp_path / "kept")
    assert sweep([tmp_path]) == 2
    assert [path.name for path in tmp_path.rglob("*")] == ["kept", "page.html"]


def test_sweep_leaves_foreign_files(tmp_path: Path) -> None:
    """Only names of the unfinished form are removed."""
    for name in (".hullbook-lock", "a.tmp", ".hullbook-errors.log"):
        (tmp_path / name).write_text("x")
    assert sweep([tmp_path]) == 0
    assert len(list(tmp_path.iterdir())) == 3


@given(st.dictionaries(st.text(max_size=4), st.lists(st.integers() | st.text(max_size=4), max_size=3), max_size=4))
def test_digests_ignore_the_order_of_keys(content: dict[str, object]) -> None:
    """The canonical form, and so the digest, is the same however a table was filled."""
    assert disk.digest_of(content) == disk.digest_of(dict(reversed(content.items())))


def test_the_digest_is_sha256() -> None:
    """The digest of "abc" is the one published in FIPS 180-2, appendix B.1."""
    assert disk.sha256(b"abc") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"


@pytest.mark.parametrize(
    "inner, is_inside", [(".", True), ("a/b", True), ("../beside", False), ("../campaigns-2", False)]
)
def test_inside_is_by_folder_not_by_text(tmp_path: Path, inner: str, is_inside: bool) -> None:
    """A folder is inside itself and its parents, and not inside one whose name begins alike."""
    outer = tmp_path / "campaigns"
    assert disk.is_inside(outer / inner, outer) is is_inside
