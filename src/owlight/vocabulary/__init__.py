"""The frozen values that cross packages, and the table of terms. A change here is a change of a seam."""
