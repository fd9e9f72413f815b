"""Answers to text and bytes: pages for people, JSON and CSV for programs."""
