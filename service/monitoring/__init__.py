"""What the operator of a running service sees: lines of a log, and figures to be scraped.

Lives here: the form of a log line, and the instruments that count and time. May import: prometheus_client
and the standard library, nothing of ours. Must never know: what is counted or said. Whoever writes a line or
counts keeps names of loops, reasons, passwords, tokens, cookies and bodies out of it.
"""
