"""HTTP in, HTTP out. Meaning comes from `application`; only status codes and shapes are decided here."""
