"""Counter-current column of equilibrium stages: equations, start, Newton's method, response."""
