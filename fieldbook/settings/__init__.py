"""Session files: TOML text to a checked `Session`, and back from the tree that an entry keeps."""
