"""The command line: parse, call one use case, show, exit code. It computes nothing."""
