"""What the user asks for: the words of a case, checked and frozen."""
