"""The whole way from files to warnings as a few plain functions; the only place that ties layers together.

`campaign` opens a plan and its store, `session` takes runs and audits them, `auditing` holds the sequential
audit of each response, `raising` turns findings into warnings and alerts, `weighing` computes what is shown,
`asking` answers queries, `replying` takes the operator's word.
"""
