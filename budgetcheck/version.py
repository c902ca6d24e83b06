"""The version of the package and of its report formats."""

VERSION = "0.1.0"
SCHEMA = "budgetcheck.assessment/1"
