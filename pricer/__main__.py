"""``python -m pricer`` is the ``pricer`` command."""

from pricer.cli import main

main()
