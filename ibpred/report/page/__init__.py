"""The HTML page of a folder of results."""
