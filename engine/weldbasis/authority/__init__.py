"""What the welding authority works with: layers compared, releases, impact of a change, sign-offs, history."""
