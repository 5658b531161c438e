"""The planning floor: from windows and links to a contact plan with a proven bound."""
