"""What is committed, and what the README promises.

The rules are the project's own; the commands are compared with the program itself.
"""

from __future__ import annotations

import re
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent

# Addresses that a committed text may hold: this machine, names kept free for examples (RFC 2606),
# private networks in examples (RFC 1918 and RFC 5737), names of XML vocabularies and of standards.
ALLOWED_HOSTS = re.compile(
    r"(127\.0\.0\.1|localhost|\[::1\]|0\.0\.0\.0|testserver|.*\.?example(\.(com|net|org))?"
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
        for host in ADDRESS.findall(text)
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


def test_version_stands_in_the_changelog() -> None:
    from readout import __version__

    assert f"## {__version__}" in (ROOT / "CHANGELOG.md").read_text(encoding="utf-8")
