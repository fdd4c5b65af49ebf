"""The host's end of the link: ports, and the client that speaks over one."""
