"""What people look at: the report page, the job sheet, the rate map, plain words."""
