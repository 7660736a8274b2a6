"""The completion scripts: current, complete, and tried in the shells themselves."""

from __future__ import annotations

import argparse
import importlib.util
import re
import shutil
import subprocess
from pathlib import Path

import pytest
import shtab

from adjust import cli

ROOT = Path(__file__).parents[2]
SCRIPTS = ROOT / "adjust" / "completion"


def _maker():
    spec = importlib.util.spec_from_file_location("make_completion", ROOT / ".ci" / "make_completion.py")
    maker = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(maker)
    return maker


def _commands():
    actions = [a for a in cli.parser()._actions if isinstance(a, argparse._SubParsersAction)]
    return actions[0].choices


def _options(parser):
    return {text for action in parser._actions for text in action.option_strings if text.startswith("--")}


@pytest.mark.parametrize("shell", cli.SHELLS)
def test_the_scripts_are_current(shell):
    """With another release of the generator its text may differ: then only the words of the next test are checked."""
    kept = (SCRIPTS / shell).read_text("utf-8")
    made_by = re.search(r"shtab (\S+)\n", kept)[1]
    if made_by == shtab.__version__:
        assert kept == _maker().scripts()[shell], "run python .ci/make_completion.py adjust/completion"


@pytest.mark.parametrize("shell", cli.SHELLS)
def test_every_command_and_option_is_in_the_scripts_and_no_other(shell):
    kept = (SCRIPTS / shell).read_text("utf-8")
    options = _options(cli.parser()).union(*(_options(p) for p in _commands().values()))
    pattern = r"^complete .* -l ([a-z-]+)" if shell == "fish" else r"(?<![\w-])--([a-z][a-z-]+)"
    found = set(re.findall(pattern, kept, re.M))
    assert found == {option.removeprefix("--") for option in options}
    assert all(re.search(rf"\b{command}\b", kept) for command in _commands())


@pytest.mark.parametrize("shell", cli.SHELLS)
def test_the_command_prints_the_script(shell, capsys):
    assert cli.main(["--completion", shell]) == 0
    assert capsys.readouterr().out == (SCRIPTS / shell).read_text("utf-8")


def test_an_unknown_shell_is_refused(capsys):
    assert cli.main(["--completion", "abacus"]) == 2
    assert "bash" in capsys.readouterr().err


@pytest.fixture
def folders(tmp_path):
    """A job, a job with a blank in its name, a folder on the way to one, and one that leads nowhere."""
    for name in ("weir", "weir two", "away/inner"):
        (tmp_path / name).mkdir(parents=True)
        (tmp_path / name / "job.toml").write_text("")
    (tmp_path / "notes").mkdir()
    (tmp_path / "weir" / "record").mkdir()
    return tmp_path


def _bash(folder, *words):
    """What bash offers for the last of the words."""
    ask = (
        'source "$1"; shift; COMP_WORDS=("$@"); COMP_CWORD=$(($# - 1)); complete -p brasscap >/dev/null || exit 9; '
        '_shtab_brasscap 2>/dev/null; printf "%s\\n" "${COMPREPLY[@]}"'
    )
    command = ["bash", "--norc", "--noprofile", "-c", ask, "bash", SCRIPTS / "bash", "brasscap", *words]
    done = subprocess.run(command, cwd=folder, capture_output=True, text=True, check=True)
    return sorted(line for line in done.stdout.splitlines() if line)


@pytest.mark.skipif(not shutil.which("bash"), reason="no bash here")
@pytest.mark.parametrize(
    ("words", "offered"),
    [
        ([""], ["adjust", "check", "start"]),
        (["ad"], ["adjust"]),
        (["--c"], ["--completion"]),
        (["--completion", ""], ["bash", "fish", "zsh"]),
        (["check", "--"], ["--help", "--quiet", "--verbose"]),
        (["adjust", "--ou"], ["--out"]),
        (["adjust", "--quiet", "--j"], ["--json"]),
        (["adjust", ""], ["away", "weir", "weir two"]),
        (["adjust", "we"], ["weir", "weir two"]),
        (["check", "away/"], ["away/inner"]),
        (["adjust", "weir", "--out", "no"], ["notes"]),
        (["adjust", "weir/"], []),
    ],
)
def test_bash_completes(words, offered, folders):
    assert _bash(folders, *words) == offered


@pytest.mark.skipif(not shutil.which("bash"), reason="no bash here")
def test_bash_completes_a_job_in_the_home_folder(folders, monkeypatch):
    monkeypatch.setenv("HOME", str(folders))
    assert _bash(Path("/"), "adjust", "~/wei") == ["~/weir", "~/weir two"]


@pytest.mark.skipif(not shutil.which("fish"), reason="no fish here")
@pytest.mark.parametrize(
    ("line", "offered"),
    [
        ("brasscap ", ["adjust", "check", "start"]),
        ("brasscap adjust --ou", ["--out"]),
        ("brasscap check we", ["weir two/", "weir/"]),
    ],
)
def test_fish_completes(line, offered, folders):
    command = ["fish", "--no-config", "-c", f"source {SCRIPTS / 'fish'}; complete -C '{line}'"]
    done = subprocess.run(command, cwd=folders, capture_output=True, text=True, check=True)
    assert sorted(one.split("\t")[0] for one in done.stdout.splitlines()) == offered


@pytest.mark.skipif(not shutil.which("zsh"), reason="no zsh here")
def test_zsh_takes_the_script():
    """Completion itself needs a terminal; here the script is parsed and registered."""
    ask = f'compdef() {{ print -r -- $* }}; eval "$(<{SCRIPTS / "zsh"})"; whence -w _shtab_brasscap'
    done = subprocess.run(["zsh", "-f", "-c", ask], capture_output=True, text=True, check=True)
    assert done.stderr == ""
    assert "brasscap" in done.stdout.splitlines()[0]
    assert done.stdout.splitlines()[-1] == "_shtab_brasscap: function"
