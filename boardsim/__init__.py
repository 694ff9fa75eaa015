"""boardsim: what a firing pattern does to a board of many coils, against the limits of every part."""
