"""What people touch: the command line and the exports. They parse, call one function and print."""
