"""The one home of the version: the build reads it from here, and so do the server and the command line."""

VERSION = "0.1.0"
