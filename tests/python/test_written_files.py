"""Files are replaced as users expect: whole or not at all, links followed, permissions kept, pipes written to."""

from __future__ import annotations

import os
import signal
import stat
import subprocess
import sys
import threading
import time
from pathlib import Path

import pytest

import windage as wd
from windage._written_file import written

POSIX = pytest.mark.skipif(sys.platform == "win32", reason="POSIX permissions and links")


def study(seed: int = 1) -> wd.Study:
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=wd.uniform(0.5, 1.5), time_constant=1.0),
        controller=wd.ErrorADRC(order=1, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=1.0),
        sample_period=0.1,
        duration=0.2,
        reference=wd.Step(1.0),
        disturbances={"load": 0.0},
    )
    return wd.Study(loop, requirements=[wd.peak("error") <= 1.0], seed=seed)


def names_in(folder: Path) -> list[str]:
    return sorted(path.name for path in folder.iterdir())


def test_a_new_file_has_the_usual_permissions_and_leaves_nothing_beside_it(tmp_path: Path) -> None:
    usual = tmp_path / "usual"
    usual.write_text("x")
    wd.save(study(), tmp_path / "study.toml")
    assert names_in(tmp_path) == ["study.toml", "usual"]
    assert (tmp_path / "study.toml").stat().st_mode == usual.stat().st_mode
    assert wd.load(tmp_path / "study.toml") == study()


@POSIX
@pytest.mark.parametrize("mode", [0o600, 0o640, 0o755, 0o666])
def test_the_permissions_of_a_replaced_file_are_kept(mode: int, tmp_path: Path) -> None:
    path = tmp_path / "study.toml"
    wd.save(study(1), path)
    path.chmod(mode)
    wd.save(study(2), path)
    assert stat.S_IMODE(path.stat().st_mode) == mode
    assert wd.load(path) == study(2)


@POSIX
def test_the_owner_of_a_replaced_file_is_kept_where_that_is_allowed(tmp_path: Path) -> None:
    path = tmp_path / "study.toml"
    wd.save(study(1), path)
    if os.geteuid() == 0:
        os.chown(path, 12345, 54321)
    before = path.stat()
    wd.save(study(2), path)
    assert (path.stat().st_uid, path.stat().st_gid) == (before.st_uid, before.st_gid)


@POSIX
def test_the_mask_of_the_process_is_never_touched(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(os, "umask", None)
    wd.save(study(), tmp_path / "study.toml")


@POSIX
def test_symbolic_links_stay_and_what_they_lead_to_is_replaced(tmp_path: Path) -> None:
    for name in ("here", "there"):
        (tmp_path / name).mkdir()
    target, link, second = tmp_path / "there" / "real.toml", tmp_path / "here" / "link.toml", tmp_path / "second.toml"
    link.symlink_to("../there/real.toml")
    second.symlink_to(link)
    wd.save(study(1), second)  # a link to a link to nothing yet
    assert wd.load(target) == study(1)
    wd.save(study(2), link)
    assert second.is_symlink()
    assert link.is_symlink()
    assert not target.is_symlink()
    assert wd.load(second) == study(2)
    assert names_in(tmp_path / "here") == ["link.toml"]
    assert names_in(tmp_path / "there") == ["real.toml"]


@POSIX
def test_a_pipe_is_written_to_and_stays(tmp_path: Path) -> None:
    pipe, got = tmp_path / "pipe", list[bytes]()
    os.mkfifo(pipe)
    reader = threading.Thread(target=lambda: got.append(pipe.read_bytes()))
    reader.start()
    with written(pipe) as file:
        file.write(b"0123")
        file.seek(1)
        file.write(b"x")
    reader.join()
    assert got == [b"0x23"]
    assert stat.S_ISFIFO(pipe.stat().st_mode)
    assert names_in(tmp_path) == ["pipe"]


@POSIX
def test_devices_and_open_descriptors_are_written_to_and_stay(tmp_path: Path) -> None:
    before = Path("/dev/null").stat()
    wd.save(study(), "/dev/null")
    assert os.path.samestat(before, Path("/dev/null").stat())
    program = "import sys; from windage._written_file import written\nprint('before')\n"
    program += "with written(sys.argv[1]) as file: file.write(b'whole')\nprint('after')"
    for name in ("/dev/stdout", "link"):
        if name == "link":
            (tmp_path / name).symlink_to("/dev/stdout")
            name = str(tmp_path / name)
        if not Path(name).exists():
            continue
        command = [sys.executable, "-c", program, name]
        piped = subprocess.run(command, capture_output=True, check=True, env=with_path())
        assert piped.stdout == b"before\nwholeafter\n"
        output = tmp_path / "output"
        with output.open("wb") as stream:
            subprocess.run(command, stdout=stream, check=True, env=with_path())
        assert output.read_bytes() == b"before\nwholeafter\n"


def with_path() -> dict[str, str]:
    return {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}


def is_root() -> bool:
    return hasattr(os, "geteuid") and os.geteuid() == 0


def test_what_cannot_be_written_is_said_with_the_name_of_the_file(tmp_path: Path) -> None:
    (tmp_path / "folder").mkdir()
    (tmp_path / "file").write_text("x")
    wrong = ["folder", "file/study.toml", "missing/study.toml", "x" * 300]
    wrong += ["/dev/full"] if Path("/dev/full").exists() else []
    for name in wrong:
        with pytest.raises(wd.OutputError, match="cannot be written") as caught:
            wd.save(study(), tmp_path / name)
        assert str(tmp_path / name)[:200] in str(caught.value)
        assert isinstance(caught.value, OSError)
    for no_name in ("a\0b", "a\ud800b", None, 3):
        with pytest.raises(wd.OutputError, match="no name of a file"):
            wd.save(study(), no_name)  # type: ignore[arg-type]
    assert names_in(tmp_path) == ["file", "folder"]


@POSIX
def test_read_only_files_and_folders_are_left_alone(tmp_path: Path) -> None:
    program = "import os, sys, windage as wd\n" + (
        "from windage._written_file import written\n"
        "if os.geteuid() == 0: os.setuid(65534)\n"
        "try:\n"
        "    with written(sys.argv[1]) as file: file.write(b'new')\n"
        "except wd.OutputError as error: print(error)\n"
    )
    path = tmp_path / "kept.json"
    path.write_text("old")
    for mode_of_file, mode_of_folder in ((0o444, 0o777), (0o666, 0o555)):
        path.chmod(mode_of_file)
        tmp_path.chmod(mode_of_folder)
        for folder in tmp_path.parents:
            if is_root() and folder != Path("/") and folder.stat().st_uid == 0 and "pytest" in str(folder):
                folder.chmod(0o755)
        done = subprocess.run(
            [sys.executable, "-c", program, str(path)], capture_output=True, text=True, check=False, env=with_path()
        )
        tmp_path.chmod(0o777)
        assert "cannot be written" in done.stdout, done.stderr
        assert path.read_text() == "old"
        assert names_in(tmp_path) == ["kept.json"]


def test_a_failure_while_writing_leaves_the_old_file_and_nothing_else(tmp_path: Path) -> None:
    path = tmp_path / "study.toml"
    path.write_text("old")

    def write_half(error: BaseException) -> None:
        with written(path) as file:
            file.write(b"half")
            raise error

    for error in (KeyboardInterrupt(), ZeroDivisionError(), MemoryError()):
        with pytest.raises(type(error)):
            write_half(error)
    with pytest.raises(wd.OutputError, match=r"No space left on device\. Free some space"):
        write_half(OSError(28, "No space left on device"))
    assert path.read_text() == "old"
    assert names_in(tmp_path) == ["study.toml"]


FULL = """
import os, resource, sys
import windage as wd
from windage import _command_line
import test_written_files as here

os.chdir(sys.argv[1])
wd.save(here.study(), "study.toml")
outcome = here.study().run(2_000, progress=False)
files = ["outcome.parquet", "table.parquet", "picture.pdf", "verdict.json"]
for name in files:
    open(name, "w").write("old")
resource.setrlimit(resource.RLIMIT_FSIZE, (1_000, 1_000))
try:
    outcome.save("outcome.parquet")
except wd.OutputError as error:
    print(error, file=sys.stderr)
for name in files[1:]:
    option = {"t": "--table", "p": "--plot", "v": "--json"}[name[0]]
    _command_line.main(["run", "study.toml", "--trials", "100", "--short", option, name])
assert sorted(os.listdir()) == sorted([*files, "study.toml"]), os.listdir()
assert all(open(name).read() == "old" for name in files)
"""


@POSIX
def test_files_that_outgrow_their_place_leave_the_old_ones_and_nothing_else(tmp_path: Path) -> None:
    path = os.pathsep.join([str(Path(__file__).parent), *sys.path])
    done = subprocess.run(
        [sys.executable, "-c", FULL, str(tmp_path)],
        capture_output=True,
        text=True,
        check=False,
        env={**os.environ, "PYTHONPATH": path},
    )
    assert done.returncode == 0, done.stderr
    assert done.stderr.count("cannot be written: File too large") == 4


def test_the_content_is_on_the_disk_before_the_name_is_moved(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    done: list[str] = []
    flush, replace = os.fsync, Path.replace

    def flushed(descriptor: int) -> None:
        done.append("folder" if stat.S_ISDIR(os.fstat(descriptor).st_mode) else "file")
        flush(descriptor)

    def replaced(part: Path, target: Path) -> Path:
        done.append("moved")
        return replace(part, target)

    monkeypatch.setattr(os, "fsync", flushed)
    monkeypatch.setattr(Path, "replace", replaced)
    wd.save(study(), tmp_path / "study.toml")
    assert done[:2] == ["file", "moved"]
    if sys.platform != "win32":
        assert done == ["file", "moved", "folder"]


WRITER = """
import sys
from windage._written_file import written
letter = sys.argv[2].encode()
print("ready", flush=True)
while True:
    with written(sys.argv[1]) as file:
        for _ in range(64):
            file.write(letter * 10_000)
"""


@POSIX
def test_a_kill_at_any_instant_leaves_the_old_file_or_the_new_one(tmp_path: Path) -> None:
    path = tmp_path / "file"
    path.write_bytes(b"0" * 640_000)
    for shot in range(4):
        letter = "abcd"[shot]
        process = subprocess.Popen(
            [sys.executable, "-c", WRITER, str(path), letter], stdout=subprocess.PIPE, env=with_path()
        )
        assert process.stdout is not None
        process.stdout.readline()
        time.sleep(0.004 * shot + 0.001)
        process.send_signal(signal.SIGKILL)
        process.wait()
        process.stdout.close()
        content = path.read_bytes()
        assert len(content) == 640_000
        assert len(set(content)) == 1
    # What the kills left beside it is in nobody's way, and goes when it is certain that nobody writes to it.
    wd.save(study(), path)
    for left in tmp_path.glob(".windage-*.part"):
        os.utime(left, (0, 0))
    wd.save(study(), path)
    assert names_in(tmp_path) == ["file"]
