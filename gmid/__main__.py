"""``python -m gmid`` is the command ``gmid``."""

from gmid.cli.app import main

if __name__ == "__main__":
    main()
