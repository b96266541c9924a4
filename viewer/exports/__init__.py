"""What can be written from a project: pictures, movies, tables. Each writes all of a file or nothing."""
