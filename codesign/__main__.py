"""`python -m codesign` is the command ``cnr``."""

from codesign.cli import run

if __name__ == "__main__":
    run()
