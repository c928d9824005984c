"""A project's files into facts: grades and eras looked up, units read, every value with its origin."""

from weldbasis.project.entries import JointEntry, Project, SteelEntry
from weldbasis.project.read import read_project

__all__ = ["JointEntry", "Project", "SteelEntry", "read_project"]
