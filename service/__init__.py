"""The gain sign-off service: what its packages are to each other. Each one's docstring states its own law.

Imports point left only; packages at one place, parted by commas, never import each other:

    analysis ← judgement ← documents ← monitoring ← records ← context
    ← figures ← sheets ← issuing ← api, pages, request_log ← app ← demonstration ← command

Two stand outside this order. `settings` reads the environment, alone, and is read by `app`, `demonstration`,
`command` and the migrations only. `verification` proves or breaks what the others wrote: it imports nothing
of ours, and only `command` imports it.

`tests/house` reads the order from this docstring and walks every import.
"""
