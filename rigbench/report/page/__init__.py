"""The report of a campaign as one HTML page that needs nothing but itself."""
