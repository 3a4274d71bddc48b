"""``python -m transim``: the same program as the command."""

from transim.cli import main

if __name__ == "__main__":
    raise SystemExit(main())
