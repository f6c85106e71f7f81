//! Rules over columns, and the episodes they write down. Nothing here yet: rules come with their own work.
