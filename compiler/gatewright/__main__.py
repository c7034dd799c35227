"""``python -m gatewright``."""

from gatewright.cli import console

if __name__ == "__main__":
    console()
