"""The board: a Streamlit application in a browser."""
