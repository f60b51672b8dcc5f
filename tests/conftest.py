"""Stands here so that pytest puts ``tests`` on the import path: ``import brute`` works in every test."""
