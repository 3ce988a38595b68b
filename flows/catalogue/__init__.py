"""The catalogue: what arrived, what was decided, under which protocol and software, and the trail of it all."""
