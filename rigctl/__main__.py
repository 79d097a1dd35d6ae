"""`python -m rigctl` is the `polrig` command."""

from rigctl.cli import main

if __name__ == "__main__":
    main()
