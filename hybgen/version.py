"""The version of hybgen."""

VERSION = "0.1.0"
