"""The version of the program, which results carry."""

VERSION = "0.1.0"
