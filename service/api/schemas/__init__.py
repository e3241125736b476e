"""The shapes of requests and answers: three schemas a record, and those of questions."""
