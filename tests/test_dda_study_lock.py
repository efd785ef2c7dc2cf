"""One writer a folder: the second is told who holds it, and a process that ends lets go."""

import json
import os
import platform
import subprocess
import sys

import pytest

from dda.errors import InputError
from dda.study.lock import HOLDER, LOCK, Lock, holder_of


def test_the_second_is_told_who_holds_it(tmp_path):
    with Lock(tmp_path):
        with pytest.raises(InputError) as caught:
            Lock(tmp_path)
        said = str(caught.value)
        assert str(tmp_path) in said
        assert f"process {os.getpid()} on {platform.node()} is running a study in it since" in said
        assert "another --out" in said
    with Lock(tmp_path):
        assert holder_of(tmp_path)["process"] == os.getpid()
    assert holder_of(tmp_path) is None


@pytest.mark.parametrize("content", [None, "{half", "[]", "{}"])
def test_a_holder_whose_name_is_not_known_holds_it_all_the_same(tmp_path, content):
    with Lock(tmp_path):
        (tmp_path / HOLDER).unlink()
        if content is not None:
            (tmp_path / HOLDER).write_text(content)
        with pytest.raises(InputError, match="another process is running a study in it"):
            Lock(tmp_path)


def test_a_process_that_was_killed_holds_nothing(tmp_path):
    code = (
        "import os, signal, sys\n"
        "from pathlib import Path\n"
        "from dda.study.lock import Lock\n"
        "lock = Lock(Path(sys.argv[1]))\n"
        "print('held', flush=True)\n"
        "sys.stdin.read()"
    )
    process = subprocess.Popen(
        [sys.executable, "-c", code, str(tmp_path)],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
    )
    assert process.stdout.readline() == "held\n"
    assert holder_of(tmp_path)["process"] == process.pid
    with pytest.raises(InputError, match=f"process {process.pid} on"):
        Lock(tmp_path)
    process.kill()
    process.communicate()
    assert json.loads((tmp_path / HOLDER).read_text())["process"] == process.pid  # left behind
    assert holder_of(tmp_path) is None
    with Lock(tmp_path):
        assert holder_of(tmp_path)["process"] == os.getpid()


def test_a_lock_that_cannot_be_made_is_told(tmp_path):
    (tmp_path / LOCK).mkdir()
    with pytest.raises(InputError, match=rf"{LOCK}: cannot be written"):
        Lock(tmp_path)


def test_a_file_that_is_no_lock_is_told(tmp_path):
    (tmp_path / LOCK).write_bytes(b"no database" * 500)
    with pytest.raises(InputError, match=rf"{LOCK}: cannot be written"):
        Lock(tmp_path)
