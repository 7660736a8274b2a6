"""How good the result is: precision, reliability, tests and the words for them."""
