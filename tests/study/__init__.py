"""The accuracy study of the matcher: lists with known truth, rivals, figures (`python -m study.run`)."""
