"""``python -m simkit`` does what the ``simkit`` command does."""

from simkit.cli import main

if __name__ == "__main__":
    main(prog_name="simkit")
