"""What a person or a program reads of a result."""
