"""Control of rotor-driven platforms that hang on an elastic tether under a slow carrier."""

__version__ = '0.1.0'
