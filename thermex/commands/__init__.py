"""One module a command; each has ``add_parser(subparsers, common)`` and ``run(arguments) -> int``."""
