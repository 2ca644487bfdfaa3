"""The shapes of all answers, as models: the reference page, OpenAPI and the JSON Schemas are made from them.

Answers are not built through these models (a result may hold a million numbers); tests hold the answers to them.
"""
