"""Completion scripts."""

import argparse


def script(shell: str, parser: argparse.ArgumentParser) -> str:
    """later"""
    return ""
