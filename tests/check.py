"""The one check command: `python -m tests.check` runs every tool, tells what each one found, and fails if any failed.

`--fix` first formats the code and mends what ruff can mend without changing what the code does.
"""

import argparse
import shutil
import subprocess
import sys
import time
from collections.abc import Sequence
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]

Command = Sequence[str]

FIXES: dict[str, Command] = {
    "ruff format": ("ruff", "format", "."),
    "ruff check --fix": ("ruff", "check", "--fix", "--exit-zero", "--quiet", "."),
}
CHECKS: dict[str, Command] = {
    "ruff format --check": ("ruff", "format", "--check", "."),
    "ruff check": ("ruff", "check", "."),
    "mypy": ("mypy",),
    "lint-imports": ("lint-imports", "--no-logo"),
    # Last, so that its closing line is seen.
    "pytest": ("pytest", "-n", "2"),
}


def installed(tool: str) -> str:
    """Return the path of a tool of this very environment; the search path may hold another one."""
    path = shutil.which(tool, path=Path(sys.executable).parent)
    if path is None:
        raise SystemExit(f"{tool} is missing here: install the project with its extra 'dev' (see README.md)")
    return path


def passes(name: str, command: Command) -> bool:
    """Run one tool in the project's folder, its output shown as it comes, and tell whether it found nothing."""
    print(f"\n=== {name}", flush=True)
    start = time.monotonic()
    status = subprocess.run([installed(command[0]), *command[1:]], cwd=ROOT, check=False).returncode
    print(f"=== {name}: {'ok' if status == 0 else 'FAILED'} ({time.monotonic() - start:.0f} s)", flush=True)
    return status == 0


def main(argv: Sequence[str] | None = None) -> int:
    """Run everything, whatever fails on the way, and return 0 where nothing did."""
    parser = argparse.ArgumentParser(prog="python -m tests.check", description=__doc__)
    parser.add_argument("--fix", action="store_true", help="format and mend first")
    steps = (FIXES if parser.parse_args(argv).fix else {}) | CHECKS
    failed = [name for name, command in steps.items() if not passes(name, command)]
    print(f"\n{'FAILED: ' + ', '.join(failed) if failed else 'All checks passed.'}", flush=True)
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
