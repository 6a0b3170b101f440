"""structure"""
