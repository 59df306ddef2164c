"""What is asked: the test spec, read strictly from its node tree, in units, with its digest."""
