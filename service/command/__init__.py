"""The console command `gain-signoff`, a file a subject.

Lives here: reading arguments and files, one call into the service, printing. May import everything to its
left. Must never know: mathematics, rules of the records, wording of findings. A subject is imported when it
is called and not before, so that `recompute` does not wait for the web or the database.
"""
