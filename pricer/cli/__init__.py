"""The command line: the only place that prints."""


def main() -> None:
    """Entry point of the ``pricer`` command."""
    from pricer.cli.app import app

    app()
