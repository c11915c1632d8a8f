"""`python -m frg.cli`: the same as the command `frg`."""

from frg.cli.main import main

if __name__ == "__main__":
    raise SystemExit(main())
