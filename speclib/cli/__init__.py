"""The command line: parse, call one workflow, render."""
