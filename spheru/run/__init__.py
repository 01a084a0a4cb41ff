"""The whole chain: settings -> nuclei -> growth -> numbers. Read `spheru.run.grow` first."""
