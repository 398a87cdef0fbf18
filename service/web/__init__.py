"""The pages that mailed links lead to; they ask the pipeline, and decide nothing."""
