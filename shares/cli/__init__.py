"""The command line: one module for each family of commands; each parses, calls one function, renders."""
