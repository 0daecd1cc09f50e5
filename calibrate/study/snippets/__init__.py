"""Pieces of study files for the usual actions: text to copy, never values that are taken by themselves."""

from calibrate.study.snippets.library import Snippet, snippet, snippets

__all__ = ["Snippet", "snippet", "snippets"]
