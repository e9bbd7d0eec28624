"""What a recomputation means to the people who answer for it.

Lives here: limits and how a value is held against them, claims compared with what was recomputed, findings
and the sentences they are said in, the one rule for digits, the words for units and verdicts. May import:
`analysis`. Must never know: JSON, the web, SQL, the clock, who is signed in. No figure of a loop is computed
here.
"""
