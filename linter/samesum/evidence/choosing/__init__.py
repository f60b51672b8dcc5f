"""What choice does to a programme as a whole: closed forms and simulation."""
