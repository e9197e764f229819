"""``python -m climbpath``: the same as the ``climbpath`` command."""

from climbpath.cli.main import run

if __name__ == "__main__":
    run()
