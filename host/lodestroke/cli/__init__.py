"""The command. Each file holds one command as `command` and imports heavy things when it runs."""
