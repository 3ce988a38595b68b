"""From the inbox to kept originals: what arrived, what of it is whole, which version it is, and how anything is written for good."""
