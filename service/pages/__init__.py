"""HTML for people: sign-in, what awaits review, loops, submissions, decisions, installations, the history.

Lives here: a module a page, the forms and the frame round them, templates and the one stylesheet. May
import: flask, the records, documents, judgement, analysis (dataclasses), figures, sheets, the context,
monitoring. Must never know: `api`, settings, SQL. No figure is computed here and no state compared: what
may be done next is asked of the records.

A handler parses, makes one call into the records inside one transaction, and renders. No page has a script.
"""
