"""`python -m wiresolve` is the command line."""

from wiresolve.cli import main

if __name__ == "__main__":
    main()
