"""Whole screens and dialogs; each puts widgets together and hands them what to show."""
