"""`python -m realize`."""

import sys

try:
    from realize.cli import main
except ModuleNotFoundError as error:
    if error.name not in ("click", "rich"):
        raise
    sys.exit(f"realize: the command line needs {error.name}; install realize[cli]")

if __name__ == "__main__":
    main(prog_name="realize")
