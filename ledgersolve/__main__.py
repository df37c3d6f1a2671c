"""``python -m ledgersolve`` is the command ``ledgersolve``."""

from ledgersolve.cli import main

if __name__ == "__main__":
    main()
