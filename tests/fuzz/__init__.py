"""Broken files by the thousand: mutations of whole ones, read in processes that may die."""
