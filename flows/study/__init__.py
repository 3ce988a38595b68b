"""What the study demands (protocol.toml) and what a site declares (acquisition.json), read into typed, frozen models."""
