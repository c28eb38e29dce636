"""Ratios that stay hidden until a study is final."""
