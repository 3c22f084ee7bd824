"""The lake: acid sensitivity from survey readings to decision."""
