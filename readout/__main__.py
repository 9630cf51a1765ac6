"""``python -m readout``."""

from readout.cli import main

if __name__ == "__main__":
    main()
