"""Requirements and past tests brought in files, read with `register.imports`; nothing here writes."""
