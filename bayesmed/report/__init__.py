"""Reports: the study file that asks for one, what is found, tables, summary page, and the folder."""
