"""What each command of the command line does, one module a command or a family of them.

The command line itself (names, options, help) is cli.py; nothing here reads arguments. Each
module is imported only when its command is given, so that help answers at once.
"""
