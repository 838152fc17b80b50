"""What pytest is not to collect here."""

#: A script that needs `atheris`, which the tests do not.
collect_ignore = ["fuzz.py"]
