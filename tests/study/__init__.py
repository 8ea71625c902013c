"""The accuracy study of the matcher: simulated lists with known truth, rivals, figures (`python -m study.run`)."""
