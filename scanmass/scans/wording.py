"""What people are told to do about a bad file: the same words everywhere."""

CUT = "the file is cut or corrupt: copy or export it again"
CUT_OR_MISCOUNTED = "the file is cut or its header is wrong: copy or export it again"
