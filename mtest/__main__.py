"""python -m mtest is the command line."""

from mtest.cli import main

if __name__ == "__main__":
    main()
