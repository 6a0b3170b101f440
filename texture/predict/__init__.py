"""predict"""
