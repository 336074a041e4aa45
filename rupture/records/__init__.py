"""Read, correct and check records; make six-component sites of them."""
