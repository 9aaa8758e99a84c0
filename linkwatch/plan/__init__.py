"""What was promised: codecs, framing, the cost of a call and the admission budget. Pure."""
