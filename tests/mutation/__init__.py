"""Mutation testing of the modules that carry the record: one small fault at a time, in a copy of the tree.

`python -m tests.mutation service/records/history.py --tests tests/records` prints every fault that no test
noticed. It is run by hand, not by pytest.
"""
