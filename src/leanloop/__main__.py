"""Run the command line as ``python -m leanloop``."""

from leanloop.cli import main

if __name__ == "__main__":
    raise SystemExit(main())
