"""The manual as Markdown, a file per topic; `rtid guide` prints it."""
