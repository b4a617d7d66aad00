"""Seawhence's library: cruises in, checked and resolved tables out. It never loads Prefect."""
