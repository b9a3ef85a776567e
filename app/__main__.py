"""The way into the program: the command `wideberth`, and `python -m app`."""

import sys
from collections.abc import Sequence

from app.kernel_cache import choose_kernel_cache

INTERRUPTED = 130  # what shells give for a program that Ctrl-C ended


def main(argv: Sequence[str] | None = None) -> int:
    """Run the command line on `argv`, the process's own arguments unless given, and return its exit status."""
    try:
        choose_kernel_cache()
        from app.cli import run  # noqa: PLC0415 - it brings numba in, which must find the cache chosen

        return run(sys.argv[1:] if argv is None else list(argv))
    except KeyboardInterrupt:
        print("wideberth: stopped", file=sys.stderr)
        return INTERRUPTED


if __name__ == "__main__":
    sys.exit(main())
