"""``python -m massfingerprint``."""

from massfingerprint.cli import entry

entry()
