"""Machine code never outlives the sources it was made from."""

import os
import subprocess
import sys

import pytest

from pdclass.compiled import kernel_folder

CALLED = "from pdclass.compiled import compiled\n\n\n@compiled\ndef called(x):\n    return {} * x\n"
CALLER = (
    "from pdclass.compiled import compiled\nfrom room.called import called\n\n\n"
    "@compiled\ndef caller(x):\n    return called(x) + 1\n"
)


@pytest.fixture
def room(tmp_path):
    """A package of two kernels in two modules, one calling the other."""
    folder = tmp_path / "room"
    folder.mkdir()
    (folder / "__init__.py").touch()
    (folder / "called.py").write_text(CALLED.format(3))
    (folder / "caller.py").write_text(CALLER)
    return folder


def called_anew(room):
    """What the caller gives for 1 in a process of its own."""
    line = "from room.caller import caller; print(caller(1))"
    environment = {**os.environ, "PYTHONPATH": f"{room.parent}{os.pathsep}{os.pathsep.join(sys.path)}"}
    environment.pop("NUMBA_CACHE_DIR", None)
    done = subprocess.run([sys.executable, "-c", line], env=environment, capture_output=True, text=True, check=True)
    return int(done.stdout)


def test_a_change_in_a_called_module_reaches_its_callers(room):
    """The caller, whose own file stays as it is, gives the new value after a kernel that it calls has changed."""
    assert called_anew(room) == 4
    (room / "called.py").write_text(CALLED.format(5))
    assert called_anew(room) == 6


def test_the_place_hangs_on_every_source_of_the_room(room):
    """One changed byte anywhere in the room gives another folder; the same sources give the same one."""
    first = kernel_folder(room)
    kernel_folder.cache_clear()
    assert kernel_folder(room) == first
    (room / "called.py").write_text(CALLED.format(5))
    kernel_folder.cache_clear()
    assert kernel_folder(room) != first
    assert kernel_folder(room).parent == room / "__pycache__"


def test_where_the_room_is_read_only_the_users_cache_is_used(room, monkeypatch):
    """An installation that cannot be written to keeps its machine code under the user's cache folder."""
    monkeypatch.setenv("XDG_CACHE_HOME", str(room.parent / "cache"))
    monkeypatch.setattr(os, "access", lambda *_: False)
    kernel_folder.cache_clear()
    assert kernel_folder(room).parent == room.parent / "cache" / "pdclass" / "room"
