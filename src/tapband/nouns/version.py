"""The version, where every layer may read it."""

VERSION = "0.1.0"
