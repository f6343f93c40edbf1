"""Where and when anything can be observed."""
