"""The command line: parse, call the API, print, exit status."""


def main() -> None:
    """Run the command `trainopt` with the arguments of this process and exit with its status."""
    from trainopt.cli.terminal import prepare_streams

    prepare_streams()

    from trainopt.cli.program import program

    program(prog_name="trainopt")
