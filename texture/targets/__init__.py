"""targets"""
