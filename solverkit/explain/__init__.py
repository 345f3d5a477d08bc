"""Why a cell is empty: minimal cores over its conditions, how far they reach, and what that means in words."""
