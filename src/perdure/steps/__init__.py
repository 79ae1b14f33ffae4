"""Workflow steps, one file each: the only place where files meet functions.

``python -m perdure.steps.<step> --study FOLDER --results FOLDER`` runs one; :mod:`perdure.steps.chain` says which there are.
"""
