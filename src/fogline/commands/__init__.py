"""The commands of ``fogline``, one module each with ``add_to(subparsers)`` and ``run(options)``."""
