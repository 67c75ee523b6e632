"""The command line: thin. Each command is a file in `commands/`; adding one is a file and a line in `main.COMMANDS`."""
