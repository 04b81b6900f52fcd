"""The command line. It reads options, calls one function and prints; it holds no arithmetic."""
