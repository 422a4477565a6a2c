"""Lets `python -m roadhem.cli` stand for `roadhem`."""

from roadhem.cli.main import main

if __name__ == "__main__":
    main()
