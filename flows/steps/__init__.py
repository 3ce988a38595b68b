"""The steps of a night as plain functions, in their order: open the study, receive, assess, publish."""
