"""The one home of the version: the build reads it from here, and so do the server and the command line."""

VERSION = "1.0.0"
