"""What commands take, and what people see of them in the terminal."""
