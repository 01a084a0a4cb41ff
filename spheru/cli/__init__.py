"""The command line: one module a command. It parses, calls one public function and prints."""
