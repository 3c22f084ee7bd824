"""The command line; it translates and thinks nothing."""
