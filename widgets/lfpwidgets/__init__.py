"""The interactive bench: plain state objects first, views over them second."""
