"""Check values made outside the project, and the loops they belong to.

- `published.json`: values from papers, textbooks, handbooks and reference libraries' own tests. `printed` is
  what the source prints, `exact` an independent recomputation with the dead time exact; `how_known` says
  whether the source was read or recalled from memory.
- `exact_dead_time.json`: 80 loops with verdict, margins (1e-8 relative, the complementary sensitivity 1e-6)
  and step metrics (times and overshoot 1e-6, integrals 1e-4) from dense search and two simulations.
- `fifty_digits.json`: 101 loops with truth recomputed to fifty digits, three methods agreeing on every root
  count; good to the last bit of float64.
"""
