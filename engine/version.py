"""The version every report names."""

VERSION = "0.1.0"
