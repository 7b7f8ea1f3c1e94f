"""Outside references for the tests; nothing in this folder imports pinsim."""
