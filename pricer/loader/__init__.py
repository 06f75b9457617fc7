"""Readers: workbooks or folders of CSV in, a frozen book and market out, every problem with its cell."""
