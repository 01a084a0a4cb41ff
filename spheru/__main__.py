"""Run the command line with ``python -m spheru``."""

from __future__ import annotations

from spheru.cli.main import main

if __name__ == "__main__":
    main()
