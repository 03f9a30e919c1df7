"""Numbers only: arrays in, fresh arrays out; one idea a file."""
