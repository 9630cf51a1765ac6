"""What is committed, and what the README promises.

The rules are the project's own; the commands are compared with the program itself.
"""

from __future__ import annotations

import re
import subprocess
import tomllib
from pathlib import Path
from typing import Any

import pytest
import typer.core
import typer.main

from readout import __version__
from readout.cli.app import app

ROOT = Path(__file__).parent.parent

# Addresses that a committed text may hold: this machine, names kept free for examples (RFC 2606),
# private networks in examples (RFC 1918 and RFC 5737), names without a dot, names of XML
# vocabularies and of standards.
ALLOWED_HOSTS = re.compile(
    r"(127\.0\.0\.1|[a-z]+|\[::1\]|0\.0\.0\.0|.*\.?example(\.(com|net|org))?"
    r"|.*\.(test|invalid)|192\.168\.\d+\.\d+|192\.0\.2\.\d+|10\.\d+\.\d+\.\d+"
    r"|www\.w3\.org|(dx\.)?doi\.org|www\.itl\.nist\.gov|www\.rfc-editor\.org)",
    re.IGNORECASE,
)
ADDRESS = re.compile(r"\b(?:https?|wss?|rtsp|ftp|git)://(?:[^/@\s\"'<>]*@)?(\[[^\]]*\]|[\w.-]+)")
BARE_REGISTRY = re.compile(
    r"\b(?:registry|index|files|deb|pkgs?|packages|proxy|static)\.[\w-]+\.(?:org|com|io|dev|net)\b"
)
MACHINE_PATH = re.compile(r"(?<![\w.~-])/(?:work|root|home|Users)/\w|(?<![\w.])/tmp/dev\b")
BUILT = re.compile(
    r"(^|/)(static|node_modules|dist|build|__pycache__|\.venv|test-results)/"
    r"|\.(whl|pyc|so|pyd|dll|exe|woff2?|ttf|otf|map|tsbuildinfo)$|\.min\.(js|css)$"
)


def tracked_files() -> list[str]:
    if not (ROOT / ".git").exists():
        pytest.skip("not a git clone: what is committed cannot be seen from here")
    listed = subprocess.run(
        ["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, check=True, text=True
    )
    return [name for name in listed.stdout.split("\0") if name and (ROOT / name).exists()]


def texts() -> dict[str, str]:
    found = {}
    for name in tracked_files():
        raw = (ROOT / name).read_bytes()
        if b"\0" not in raw:
            found[name] = raw.decode("utf-8")
    assert len(found) > 30, "too few files seen for these checks to mean anything"
    return found


def offences(pattern: re.Pattern[str]) -> list[str]:
    return [
        f"{name}:{number}: {line.strip()[:120]}"
        for name, text in texts().items()
        for number, line in enumerate(text.splitlines(), 1)
        if name != "tests/test_repository.py" and pattern.search(line)
    ]


def test_no_address_outside_the_allowed_ones() -> None:
    strange = [
        f"{name}: {host}"
        for name, text in texts().items()
        for host in ADDRESS.findall(text.replace("\\.", "."))  # in patterns, dots are escaped
        if not ALLOWED_HOSTS.fullmatch(host)
    ]
    assert strange == []


def test_no_host_of_a_registry_without_its_scheme_either() -> None:
    assert offences(BARE_REGISTRY) == []


def test_the_lock_files_name_no_place_of_download() -> None:
    assert '"resolved"' not in (ROOT / "web/package-lock.json").read_text(encoding="utf-8")
    constraints = (ROOT / "constraints.txt").read_text(encoding="utf-8").splitlines()
    pins = [line for line in constraints if line and not line.startswith("#")]
    assert len(pins) > 20
    assert [pin for pin in pins if not re.fullmatch(r"[a-z0-9-]+==[0-9][\w.]*", pin)] == []


def test_no_path_of_one_machine() -> None:
    assert offences(MACHINE_PATH) == []


def test_no_built_file() -> None:
    assert [name for name in tracked_files() if BUILT.search(name)] == []


def test_no_minified_script() -> None:
    long = [
        name
        for name, text in texts().items()
        if name.endswith((".js", ".ts", ".css", ".html", ".svelte", ".py", ".md"))
        and max(map(len, text.splitlines()), default=0) > 1000
    ]
    assert long == []


@pytest.mark.parametrize(
    ("pattern", "bad"),
    [
        (ADDRESS, "see https://" + "somewhere.net/x"),
        (BARE_REGISTRY, "from " + "registry" + ".somewhere.org"),
        (MACHINE_PATH, "open /" + "home/somebody/x"),
        (BUILT, "readout/static/index.html"),
        (BUILT, "web/fonts/some.woff2"),
    ],
)
def test_the_patterns_catch_what_they_are_for(pattern: re.Pattern[str], bad: str) -> None:
    assert pattern.search(bad)


def python_lines(pattern: str) -> list[str]:
    return [
        f"{path.relative_to(ROOT).as_posix()}: {line.strip()}"
        for path in sorted((ROOT / "readout").rglob("*.py"))
        for line in path.read_text(encoding="utf-8").splitlines()
        if re.search(pattern, line)
    ]


def test_one_place_decodes_and_encodes_pictures() -> None:
    calls = python_lines(r"\b(imread|imdecode|imwrite|imencode)\w*\(")
    assert calls
    assert [c for c in calls if not c.startswith("readout/files/pictures.py:")] == []


def test_one_package_opens_cameras_and_videos() -> None:
    calls = python_lines(r"\bVideoCapture\(")
    assert calls
    assert [c for c in calls if not c.startswith("readout/capture/")] == []


def readme() -> str:
    return (ROOT / "README.md").read_text(encoding="utf-8")


def shell_lines() -> list[str]:
    """Lines of the fenced blocks, and code within the text, that start the program."""
    text = readme()
    lines = [
        line.strip()
        for block in re.findall(r"```\w+\n(.*?)```", text, re.DOTALL)
        for line in block.splitlines()
    ]
    return lines + re.findall(r"`(readout [^`]+)`", text)


def program_calls() -> list[list[str]]:
    """Arguments of every call of the program in the README."""
    calls = []
    for line in shell_lines():
        for part in line.split("&&"):
            words = part.split()
            if words and re.split(r"[\\/]", words[0])[-1] == "readout" and len(words) > 1:
                calls.append(words[1:])
    return calls


def commands() -> dict[str, set[str]]:
    """The program's commands, each with its options."""
    group = typer.main.get_command(app)
    assert isinstance(group, typer.core.TyperGroup)
    return {
        name: {"--help"} | options(command)
        for name, command in group.commands.items()
        if not command.hidden
    }


def options(command: Any) -> set[str]:
    """Its options, and those of the commands below it."""
    group = isinstance(command, typer.core.TyperGroup)
    below = command.commands.values() if group else ()
    own = {name for p in command.params for name in (*p.opts, *p.secondary_opts)}
    return own.union(*map(options, below))


def test_every_command_of_the_program_stands_in_the_readme() -> None:
    assert {call[0] for call in program_calls()} >= set(commands())


def test_every_call_in_the_readme_is_one_the_program_knows() -> None:
    known = commands()
    calls = [call for call in program_calls() if call[0] != "COMMAND"]
    assert len(calls) > 5
    for name, *words in calls:
        assert name in known, f"readout {name}"
        assert {w for w in words if w.startswith("--")} <= known[name], f"readout {name} {words}"


def test_both_commands_set_up_everything() -> None:
    lines = shell_lines()
    for start, end in [
        ("python3 -m venv .venv && .venv/bin/pip install -c constraints.txt", "readout live"),
        ("python3 -m venv .venv && .venv/bin/pip install -c constraints.txt", "pytest"),
    ]:
        assert [line for line in lines if line.startswith(start) and line.endswith(end)]
    for line in ("py -m venv .venv", r".venv\Scripts\readout live", r".venv\Scripts\pytest"):
        assert line in lines


def test_the_extras_named_in_the_readme_exist() -> None:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    named = set(re.findall(r"\.\[(\w+)\]", readme()))
    assert named
    assert named <= set(project["optional-dependencies"])


def test_files_named_in_the_texts_exist() -> None:
    pages = [f"docs/{page.name}" for page in sorted((ROOT / "docs").glob("*.md"))]
    assert pages
    for text in ("README.md", "DEVELOPERS.md", *pages):
        folder = (ROOT / text).parent
        content = (ROOT / text).read_text(encoding="utf-8")
        links = re.findall(r"\]\(([\w./-]+)\)", content)
        missing = [link for link in links if not (folder / link).exists()]
        assert missing == [], text


def test_every_page_of_the_docs_is_linked_from_the_readme() -> None:
    for page in (ROOT / "docs").glob("*.md"):
        assert f"](docs/{page.name})" in readme(), page.name


@pytest.mark.parametrize(
    "caution",
    [
        "never look into the instrument",
        "laser",
        "never point the instrument at the sun",
        "lock it out and make it safe",
        "before hands go near, support it",
        "local codes and licensed practice come first",
    ],
)
def test_the_cautions_are_there(caution: str) -> None:
    assert caution in re.sub(r"\s+", " ", readme().lower())


def test_the_cautions_come_before_the_first_use() -> None:
    text = readme().lower()
    assert text.index("never look into the instrument") < text.index("what to do first")
    assert text.index("lock it out") < text.index("what to do first")


def test_version_stands_in_the_changelog() -> None:
    assert f"## {__version__}" in (ROOT / "CHANGELOG.md").read_text(encoding="utf-8")
