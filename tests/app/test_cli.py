"""The command: what it serves, says and returns. Exit codes: 0 or 130 after Ctrl-C, 2 for bad use (common practice)."""

import os
import re
import signal
import subprocess
import sys
import tomllib
import urllib.request
from pathlib import Path

import pytest

from app.__main__ import DEFAULT_SAMPLE, main, sample_file

ROOT = Path(__file__).parent.parent.parent


def run(*arguments, cwd=ROOT):
    """The command as a process of its own."""
    environment = {**os.environ, "PYTHONPATH": str(ROOT), "PYTHONUNBUFFERED": "1"}
    return subprocess.Popen([sys.executable, "-m", "app", *arguments], cwd=cwd, env=environment, text=True,
                            stdout=subprocess.PIPE, stderr=subprocess.PIPE)


@pytest.mark.parametrize("name", ["SIGINT", "SIGTERM"])
def test_it_serves_says_where_and_ends_cleanly(name, tmp_path):
    with run("--no-browser", cwd=tmp_path) as process:
        said = ""
        while "is at" not in said:
            line = process.stdout.readline()
            assert line, process.stderr.read()
            said += line
        url = re.search(r"http://127\.0\.0\.1:\d+/", said).group()
        with urllib.request.urlopen(url, timeout=60) as answer:
            assert answer.status == 200
            assert b"Elastovox" in answer.read()
        process.send_signal(getattr(signal, name))
        rest, errors = process.communicate(timeout=60)
    assert process.returncode in (0, 130)
    assert "Traceback" not in rest + errors


@pytest.mark.parametrize(("content", "words"), [
    (b"", "empty"), (b"not a design", "TOML"), (b"\xff\xfe\x00", "UTF-8"), (b"x" * 70000, "large"),
    (b'name = "x"\n[film]\nprestrech = 1.2\n', "prestretch"), (None, "wrong.toml")])
def test_a_bad_file_is_a_message_and_code_2(tmp_path, capsys, content, words):
    path = tmp_path / "wrong.toml"
    if content is not None:
        path.write_bytes(content)
    assert main([str(path), "--no-browser"]) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    assert "wrong.toml" in captured.err
    assert words.lower() in captured.err.lower()
    assert "Traceback" not in captured.err


def test_a_folder_is_no_file(tmp_path, capsys):
    assert main([str(tmp_path), "--no-browser"]) == 2
    assert str(tmp_path) in capsys.readouterr().err


@pytest.mark.parametrize("arguments", [
    ["--port", "0"], ["--port", "70000"], ["--port", "x"], ["--address", "evil.example"], ["--address", "1.2.3"],
    ["--nonsense"], ["a.toml", "b.toml"]])
def test_bad_options_are_told_and_end_with_code_2(capsys, arguments):
    with pytest.raises(SystemExit) as end:
        main(arguments)
    assert end.value.code == 2
    assert "usage: elastovox" in capsys.readouterr().err


def test_the_default_sample_is_there():
    assert b"name" in sample_file(DEFAULT_SAMPLE).read_bytes()


def test_help_needs_no_numerics():
    """--help answers without numpy and panel, which take seconds."""
    code = ("import sys, app.__main__ as m\ntry: m.main(['--help'])\nexcept SystemExit: pass\n"
            "print({'numpy', 'panel'} & set(sys.modules))")
    ended = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, timeout=60,
                           check=True)
    assert ended.stdout.endswith("set()\n")


def test_every_file_beside_the_code_is_packaged():
    """A wheel holds what a checkout holds: styles, browser code and samples too."""
    settings = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["tool"]["setuptools"]
    for package in settings["packages"]:
        folder = ROOT / package.replace(".", "/")
        packaged = {path for pattern in settings["package-data"].get(package, []) for path in folder.glob(pattern)}
        beside = {path for path in folder.iterdir() if path.is_file() and path.suffix not in (".py", ".pyc")}
        assert beside - packaged == set()
    for name in ("app", "engine"):
        held = {".".join(path.relative_to(ROOT).parent.parts) for path in (ROOT / name).rglob("*.py")}
        assert held <= set(settings["packages"])
