"""Closure rules as dated data; adjust.book.rules reads them."""
