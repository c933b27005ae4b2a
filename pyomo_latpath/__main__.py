"""Run the command line as `python -m pyomo_latpath`."""

from .cli import main

if __name__ == "__main__":
    main(prog_name="latpath")
