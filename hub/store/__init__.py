"""The only package that speaks SQL. One module a family of queries; one writer; readers read only."""
