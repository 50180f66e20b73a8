"""`python -m finback` is the command line."""

from finback.cli import main

if __name__ == "__main__":
    main()
