"""Starts the command line: `python -m linkwatch`."""

from linkwatch.cli import main

if __name__ == "__main__":
    main()
