"""composition"""
