#!/usr/bin/env python
"""Command line of the site: `python manage.py start` serves it, `python manage.py help` lists the rest."""

import os
import sys


def main() -> None:
    os.environ.setdefault("DJANGO_SETTINGS_MODULE", "register.settings")
    from django.core.management import execute_from_command_line

    execute_from_command_line(sys.argv)


if __name__ == "__main__":
    main()
