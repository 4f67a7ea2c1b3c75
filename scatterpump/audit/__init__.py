"""The audit: everything that would make the integer meaningless, looked at one by one."""
