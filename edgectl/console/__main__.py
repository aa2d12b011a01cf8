"""`python -m edgectl.console`: the same as `edgectl`."""

from edgectl.console.commands import main

if __name__ == "__main__":
    main(prog_name="edgectl")
