"""The workbench on the terminal: the only room that knows Textual."""
