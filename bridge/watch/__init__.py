"""Folders, events, scans, the queue and the worker processes. No workbooks, no statistics."""
