"""`frg`: the command line. Parses arguments, dispatches, turns errors into one message and an exit code."""

from __future__ import annotations

import sys
from collections.abc import Sequence

from frg.cli.options import build_parser
from frg.errors import FrgError, InputError, Place

DONE, FAILED, BAD_INPUT, INTERRUPTED = 0, 1, 2, 130


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command; returns the exit code (0 done, 1 nothing found or failed, 2 bad input,
    130 interrupted)."""
    given = list(sys.argv[1:] if arguments is None else arguments)
    parser = build_parser()
    options = parser.parse_args(given)
    if options.command is None:
        parser.print_help()
        return BAD_INPUT
    try:
        return int(_run(options, given))
    except FrgError as error:
        if isinstance(error, InputError) and error.place.source is None:
            error = error.at(Place(source=getattr(options, "file", None)))
        print(f"frg: {error}", file=sys.stderr)
        return error.exit_code
    except KeyboardInterrupt:
        print("frg: interrupted; what was committed is kept", file=sys.stderr)
        return INTERRUPTED
    except BrokenPipeError:
        # the reader of our output has left (for example `| head`); not an error of ours
        sys.stderr.close()
        return DONE


def _run(options, given: Sequence[str]) -> int:  # type: ignore[no-untyped-def]
    if options.command in ("equations", "solve", "converge"):
        from frg.cli import compute

        return compute.run(options, given)
    from frg.cli import shelf

    return shelf.run(options)
