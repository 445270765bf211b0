"""``python -m fitter`` is the command ``fetwright``."""

from fitter.cli import main

if __name__ == "__main__":
    main()
