"""Shots: from files of measured bitstrings to outcomes by circuit, and what is wrong with them.

- `reader`: `read_shots`, one file or a folder of files; `shots`: what it gives.
- `sources`: which files hold shots; `csv_file`, `json_file`, `npz_file`, `parquet_file`: one format each, with one
  function `batches(source, exact)`. A new format is one such file, and one row in `sources.FORMATS`.
- `records`: rows as the formats hand them over; `columns`: tables of pyarrow; `decode`: characters to bits;
  `intake`: rows against the roster; `tally`: equal outcomes added up; `outcomes`: the outcomes of one circuit.
- `declarations`: shots.toml and execution.toml.
- `audit`: `check_shots`, `missing_circuits`; `completeness`: its counts; `findings`: its questions.
"""
