"""A second, deliberately plain reading of the rulebook language's meaning.

``rulebooks`` holds small rulebooks and writes them as text, ``points`` finds the projects and
human inputs that stand for all others, ``evaluate`` lists every evaluation and counts, ``trial``
does the same for numbers, ``generate`` makes rulebooks at random and ``shrink`` makes a failing one
small. Nothing here imports samesum: agreement between the two is worth something only so long as
they share no code.
"""
