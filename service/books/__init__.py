"""The limit books that come with the service, as data: each file is the body that drafts one edition."""
