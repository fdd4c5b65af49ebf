"""The link, without any port, clock or role inside: frames, messages and sessions for both ends."""
