"""The one place where the version number stands."""

VERSION = "0.1.0"
