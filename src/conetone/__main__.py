"""The command `conetone`, and `python -m conetone`, which the workflow's jobs use."""

from conetone.cli import main

if __name__ == "__main__":
    main()
