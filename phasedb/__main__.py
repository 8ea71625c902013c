"""``python -m phasedb``."""

from phasedb.cli import main

if __name__ == "__main__":
    main()
