"""The topics of ``shpb help``: plain text, from the tables that the program itself works by wherever there is one."""
