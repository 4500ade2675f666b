"""What people see and touch: the board in the browser, the terminal command, the reports."""
