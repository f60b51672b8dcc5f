"""What several tests share: a rulebook's evidence from its text, and the replay of a witness."""
