"""What the commands do, without a terminal: each function is the Python twin of one."""
