"""samesum: does a quantification rulebook give the same number whoever applies it?"""

__version__ = "0.1.0"
