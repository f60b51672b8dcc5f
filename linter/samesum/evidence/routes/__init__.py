"""Which routes there are: conditions, exact counts, witnesses, who can move what."""
