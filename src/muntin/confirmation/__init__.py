"""Column runs that confirm a window: which, what is predicted of them, and what came of it."""
