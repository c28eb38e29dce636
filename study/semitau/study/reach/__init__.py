"""What more data would bring."""
