"""`python -m symamp`."""

from symamp.cli import main

if __name__ == "__main__":
    main()
