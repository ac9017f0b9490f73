"""Terms, their exact normal form, and their evaluation."""
