"""Published values reproduced, a file a source; the source stands beside each test.

The values are those of `tests/checks/published.json`: `printed` is what the source prints, `exact` an
independent recomputation of the same example with its dead time exact, told to six decimals. Whether a
source was read or recalled from memory stands in the file under `how_known` and in each module here.
`test_ledger` says why a value of the file that is not reproduced here is not.
"""
