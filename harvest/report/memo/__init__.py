"""The design memo: values for templates, drawings, templates in a sandbox, and a writer for each format."""
