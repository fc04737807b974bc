"""``python -m scanmass``: the same as the command ``scanmass``."""

from scanmass.cli.main import main

if __name__ == "__main__":
    main()
