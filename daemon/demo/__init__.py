"""An invented night at an invented bench: rules, deliveries in time order, and what a chemist should see at the end."""
