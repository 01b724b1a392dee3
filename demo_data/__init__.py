"""The demo: three years of Larkmere District Hospital, an invented hospital of eight wards."""
