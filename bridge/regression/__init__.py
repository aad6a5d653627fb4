"""The numeric core: pure functions on arrays, frozen results. Imports nothing of ours."""
