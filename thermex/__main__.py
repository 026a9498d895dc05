"""``python -m thermex``: the command line."""

from thermex.cli import script

if __name__ == "__main__":
    script()
