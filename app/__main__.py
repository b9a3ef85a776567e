"""The way into the program: the command `wideberth`, and `python -m app`."""

import os
import sys
from collections.abc import Sequence

from app.kernel_cache import choose_kernel_cache

INTERRUPTED = 130  # what shells give for a program that Ctrl-C ended
PIPE_CLOSED = 141  # and for one whose reader went away, as `| head` does
BROKEN = 70  # a fault of the program, not of its input


def main(argv: Sequence[str] | None = None) -> int:
    """Run the command line on `argv`, the process's own arguments unless given, and return its exit status."""
    try:
        choose_kernel_cache()
        from app.cli import run  # noqa: PLC0415 - it brings numba in, which must find the cache chosen

        return run(sys.argv[1:] if argv is None else list(argv))
    except KeyboardInterrupt:
        print("wideberth: stopped", file=sys.stderr)
        return INTERRUPTED
    except BrokenPipeError:
        # Python would complain once more when it flushes at the end.
        sys.stdout = open(os.devnull, "w", encoding="utf-8")  # noqa: PTH123, SIM115
        return PIPE_CLOSED
    except Exception as error:
        if os.environ.get("WIDEBERTH_TRACEBACK"):
            raise
        print(
            f"wideberth: a fault of the program itself ({type(error).__name__}: {error}). Nothing that it was about to "
            "write can be relied on. Please report it; WIDEBERTH_TRACEBACK=1 shows where.",
            file=sys.stderr,
        )
        return BROKEN


if __name__ == "__main__":
    sys.exit(main())
