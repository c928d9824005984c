"""The static site: pages and pictures from traces and knowledge, built by mkdocs through a small plugin."""
