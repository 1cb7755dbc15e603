"""``python -m coldseam``: the same as the command ``coldseam``."""

from coldseam.cli import main

if __name__ == "__main__":
    raise SystemExit(main())
