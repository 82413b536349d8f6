"""`python -m analyse` is `strewn`."""

from analyse.cli import main

if __name__ == "__main__":
    main()
