"""The web pages. `entry` is the script that is started; each page beside it draws what the pure modules return."""
