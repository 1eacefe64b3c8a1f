"""The command line: parse, call the api, print."""
