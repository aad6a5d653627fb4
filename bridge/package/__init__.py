"""The zip and its parts: takes our sheets out and grafts them in. No statistics, no request."""
