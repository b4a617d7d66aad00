"""The version of the pipeline, written into every table it makes."""

VERSION = "0.1.0"
