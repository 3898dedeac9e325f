"""Renders held still: lock files over packs, and what moved since.

Importing this package loads nothing, so that pytest can load the plugin in it at no cost.
"""
