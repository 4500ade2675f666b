"""The rooms of the board: one page a file. Each makes its HTML by a pure function of a snapshot and a visit."""
