"""Pictures about pictures: labels on a render, drawings of crystals and rays."""
