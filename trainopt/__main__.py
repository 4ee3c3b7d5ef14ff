"""`python -m trainopt` is the command `trainopt`."""

from trainopt.cli import main

if __name__ == "__main__":
    main()
