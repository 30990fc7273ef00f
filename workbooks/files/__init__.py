"""The formats of logbooks, read and written so that what is not set keeps its bytes."""
