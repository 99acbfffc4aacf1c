"""`python -m realize`."""

import sys

try:
    from realize.cli import main
except ModuleNotFoundError as error:
    if error.name not in ("click", "rich"):
        raise
    print(f"realize: the command line needs {error.name}; install realize[cli]", file=sys.stderr)
    sys.exit(2)

if __name__ == "__main__":
    main(prog_name="realize")
