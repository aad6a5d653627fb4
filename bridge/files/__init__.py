"""Reading a whole snapshot, who has the file open, swap and verify, recovery. No workbooks, no statistics."""
