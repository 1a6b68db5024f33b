"""The terminal. Commands compute nothing: they build a request, run an operation and print its response."""
