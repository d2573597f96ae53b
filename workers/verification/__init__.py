"""Reference cases that a user can run on the installed program."""
