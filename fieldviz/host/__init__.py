"""The plugin for the host application, ParaView: declaration, installer, check."""
