"""The program's version: printed in the report, read by the build."""

VERSION = "0.1.0"
