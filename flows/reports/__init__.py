"""Pages of a night and of each acquisition, drawn from plain data; they need no server, no network and no script."""
