"""The sheet on paper: what a technician takes to the panel, and the paper copy of a record.

Lives here: what stands on a sheet (`content`, from frozen views of the records), how it is laid out
(`layout`), and the cautions. May import: figures, the views of the records, documents, judgement, analysis
(dataclasses only), reportlab, segno. Must never know: a session, SQL, the web, settings, the clock.

A sheet depends on the record, its state and `RENDERER_VERSION` only, byte for byte in every process.
"""
