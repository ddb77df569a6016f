"""`python -m reviewkit`."""

from reviewkit.cli import main

if __name__ == "__main__":
    main()
